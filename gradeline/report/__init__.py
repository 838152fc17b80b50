"""A reduction to what people read and keep: figures, page, tables, terminal."""
