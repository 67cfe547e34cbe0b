"""The nouns every other folder speaks: parts, what a machine asks, what the program answers."""
