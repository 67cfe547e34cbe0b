"""Files to records: text with places, then meaning, with every fault of every file in one run."""
