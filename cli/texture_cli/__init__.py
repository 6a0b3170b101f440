"""The command `texture`."""
