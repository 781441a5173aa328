"""The exact engine: IR on concrete values, and what paths through a function require and do."""
