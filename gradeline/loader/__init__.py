"""Files to a survey: every problem is collected with its place, and all are told at once."""
