"""Third stage: parsed declarations become a typed program whose function bodies are graphs of simple statements."""
