"""The formats a report can be written in."""

__all__ = ["DEFAULT_FORMATS", "FORMATS", "PAPERS"]

#: All of them, in the order in which they are written.
FORMATS = ("html", "json", "csv", "svg", "png", "pdf", "xlsx")
#: What is written unless somebody asks: pdf and xlsx take longer than the rest together.
DEFAULT_FORMATS = ("html", "json", "csv", "svg", "png")
#: Sizes of paper.
PAPERS = ("a4", "letter")
