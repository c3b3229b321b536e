"""The version, a constant: reading it from package metadata would cost a third of the start-up time."""

VERSION = "0.1.0"
