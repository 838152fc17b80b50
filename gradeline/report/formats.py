"""The formats a report can be written in."""

__all__ = ["FORMATS"]

#: In the order in which they are written.
FORMATS = ("html", "json", "csv", "svg", "png")
