"""First stage: from the command line to the translation units to read."""
