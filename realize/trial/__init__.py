"""The emitted files at work: compiled, run against their vectors on the processor they are for, and measured."""
