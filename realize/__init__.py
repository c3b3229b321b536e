"""From a transfer function in s to difference-equation code the firmware can trust."""
