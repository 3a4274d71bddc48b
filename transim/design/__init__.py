"""The design file: what the user asks for, read once and then frozen."""
