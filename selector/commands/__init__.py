"""One thin file per command: options in, workflow called, report printed."""
