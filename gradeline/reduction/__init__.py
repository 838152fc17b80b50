"""The one place that composes: a survey in, a reduction (a frozen set of tables) out."""
