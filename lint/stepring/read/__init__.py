"""Second stage: from a translation unit to the parsed declarations that matter, each with its original place."""
