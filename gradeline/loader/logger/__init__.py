"""Logger files, streamed: one pass of an engine over any number of rows, a bounded number of blocks kept."""
