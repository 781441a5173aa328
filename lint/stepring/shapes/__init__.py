"""Fifth stage: the machines and rings that the program holds."""
