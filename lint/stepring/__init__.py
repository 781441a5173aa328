"""stepring inspects embedded C for defects in state machines and ring-shaped storage.

The package is one pipeline, a folder for each stage (gather, read, meaning, values, paths, shapes, report); the output
types of a stage stand in its ``types.py``. ``stepring.pipeline`` is the whole of it in one visible tuple.
"""

__version__ = "0.1.0"
