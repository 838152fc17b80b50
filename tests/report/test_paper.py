"""The PDF: the page's sections in the page's order, whole tables, the signs, the papers."""

from __future__ import annotations

import dataclasses
import io
import re
from html.parser import HTMLParser

import pytest
from pypdf import PdfReader

from gradeline.quantities.printing import SI_DISPLAY, US_DISPLAY
from gradeline.reduction.tables import Reduction
from gradeline.report.blocks import Tabled, headings
from gradeline.report.figures import pictures
from gradeline.report.figures.render import Picture
from gradeline.report.outline import outline
from gradeline.report.page import page
from gradeline.report.paper import Paper, room_for
from gradeline.report.pdf import as_pdf
from gradeline.report.printed import PrintedTable
from gradeline.report.sentences import summarise

#: mm; ISO 216 and ANSI/ASME Y14.1 (8.5 in by 11 in).
SIZES = {"a4": (210.0, 297.0), "letter": (215.9, 279.4)}


def read(content: bytes) -> PdfReader:
    return PdfReader(io.BytesIO(content), strict=True)


def words(content: bytes) -> str:
    """All text of a PDF, any run of blanks as one."""
    return " ".join(" ".join(sheet.extract_text() for sheet in read(content).pages).split())


def bookmarks(entries: list) -> list[str]:
    found = []
    for entry in entries:
        found += bookmarks(entry) if isinstance(entry, list) else [entry.title]
    return found


class Headings(HTMLParser):
    """The headings of a page, and the lines under which it folds something."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []
        self.inside = False

    def handle_starttag(self, tag: str, attrs: object) -> None:  # noqa: ARG002 (the library's signature)
        if tag in ("h1", "h2", "h3", "summary"):
            self.inside = True
            self.found.append("")

    def handle_endtag(self, tag: str) -> None:
        if tag in ("h1", "h2", "h3", "summary"):
            self.inside = False

    def handle_data(self, data: str) -> None:
        if self.inside:
            self.found[-1] += data


@pytest.fixture(scope="session")
def drawn(field: Reduction) -> tuple[Picture, ...]:
    return pictures(field, png=False, paper=True)


@pytest.fixture(scope="session", params=["a4", "letter"])
def paper(request: pytest.FixtureRequest) -> str:
    return str(request.param)


@pytest.fixture(scope="session")
def pdf(field: Reduction, drawn: tuple[Picture, ...], paper: str) -> bytes:
    return as_pdf(field, drawn, "9.9", paper=paper)  # type: ignore[arg-type]  # a text for a literal


def test_page_and_pdf_have_the_same_headings_in_the_same_order(
    field: Reduction, drawn: tuple[Picture, ...], pdf: bytes
) -> None:
    parser = Headings()
    parser.feed(page(field, drawn, "9.9"))
    assert parser.found == bookmarks(read(pdf).outline) == list(headings(outline(field, "9.9")))
    assert len(parser.found) > 20


def test_the_headings_stand_in_the_pdf_in_that_order(field: Reduction, pdf: bytes) -> None:
    text, at = words(pdf), 0
    for heading in headings(outline(field, "9.9")):
        at = text.index(heading, at) + len(heading)


def test_sheets_have_the_size_of_their_paper_and_are_numbered(pdf: bytes, paper: str) -> None:
    sheets = read(pdf).pages
    for number, sheet in enumerate(sheets, 1):
        size = tuple(float(edge) * 25.4 / 72 for edge in sheet.mediabox[2:])
        assert size == pytest.approx(SIZES[paper], abs=0.05)
        assert f"gradeline 9.9 · page {number} of {len(sheets)}" in sheet.extract_text()
    assert len(sheets) > 5


def test_the_pdf_says_what_the_page_says(field: Reduction, pdf: bytes) -> None:
    text = words(pdf)
    summary = summarise(field)
    for sentence in (*summary.found, *summary.look, summary.close, *field.assumptions):
        assert " ".join(sentence.split()) in text
    for section in outline(field, "9.9").sections:
        for block in section.blocks:
            if isinstance(block, Tabled):
                for row in block.printed.rows:
                    for cell in row:
                        for word in cell.split():
                            assert word in text


def test_there_is_a_block_to_sign_on_the_first_sheet(pdf: bytes) -> None:
    first = " ".join(read(pdf).pages[0].extract_text().split())
    assert re.search(r"Prepared by.*Date.*Checked by.*Date", first)
    assert first.index("Checked by") < first.index("Summary")


def test_every_font_is_in_the_file_and_has_the_signs(pdf: bytes) -> None:
    fonts = set()
    for sheet in read(pdf).pages:
        for font in sheet["/Resources"]["/Font"].values():
            descendant = font.get_object()["/DescendantFonts"][0].get_object()
            assert "/FontFile2" in descendant["/FontDescriptor"].get_object()
            fonts.add(str(descendant["/BaseFont"]).partition("+")[2])
    assert fonts == {"DejaVuSansBook", "DejaVuSansBold", "DejaVuSansMonoBook"}


@pytest.mark.parametrize(
    "sign", ["ε", "ν", "±", "²", "⁻⁷", "⁺", "∝", "χ", "σ₀", "−", "\u202f", "≤", "–", "·"]
)
def test_signs_come_out_as_they_went_in(sign: str, caplog: pytest.LogCaptureFixture) -> None:
    sheet = Paper("a4", "Signs", "9.9")
    sheet.add_page()
    sheet.words(f"before{sign}after")
    assert f"before{sign}after" in read(sheet.finished()).pages[0].extract_text()
    assert not caplog.records  # the library logs glyphs that a font lacks


def test_the_heads_of_a_long_table_come_again_on_every_sheet() -> None:
    rows = tuple((f"R{n}", f"{n}.25", "laminar") for n in range(300))
    sheet = Paper("letter", "Long", "9.9")
    sheet.add_page()
    sheet.tabled(PrintedTable("A long table.", ("run", "flow (L/s)", "regime"), rows, frozenset({0, 2})))
    sheets = read(sheet.finished()).pages
    assert len(sheets) > 4
    for one in sheets:
        assert " ".join(one.extract_text().split()).count("run flow (L/s) regime") == 1
    text = " ".join(one.extract_text() for one in sheets)
    assert [int(found) for found in re.findall(r"\bR(\d+)\b", text)] == list(range(300))


def test_a_table_too_wide_goes_on_below_with_its_first_column() -> None:
    heads = ("run", *(f"quantity{n} (mm)" for n in range(40)))
    table = PrintedTable("Wide.", heads, (("R1", *(f"{n}.12345" for n in range(40))),), frozenset({0}))
    sheet = Paper("a4", "Wide", "9.9")
    sheet.add_page()
    sheet.tabled(table)
    text = " ".join(read(sheet.finished()).pages[0].extract_text().split())
    assert text.count("R1 ") > 1
    assert all(f"{n}.12345" in text for n in range(40))


def test_short_tables_stay_whole() -> None:
    table = PrintedTable("Short.", ("run",), (("R1",),) * 8, frozenset({0}))
    sheet = Paper("a4", "Short", "9.9")
    sheet.add_page()
    sheet.set_y(sheet.page_break_trigger - room_for(table) + 5)
    sheet.tabled(table)
    sheets = read(sheet.finished()).pages
    assert [one.extract_text().count("R1") for one in sheets] == [0, 8]


def test_words_of_a_file_are_words_and_no_more(hostile: Reduction) -> None:
    odd = dataclasses.replace(
        hostile,
        survey={**hostile.survey, "source": "caf\udce9", "title": "**no markup** __here__ {nb}\x07\n水"},
        assumptions=("x" * 4000, "a\tb"),
    )
    content = as_pdf(odd, (), "9.9")
    assert "<img src=x onerror=alert(1)>" in words(content)
    assert "**no markup** __here__" in words(content)
    assert b"/JavaScript" not in content
    assert b"/URI" not in content


def test_figures_are_drawn_and_hatched_ones_are_pictures(
    drawn: tuple[Picture, ...], pdf: bytes, field: Reduction
) -> None:
    hatched = [picture for picture in drawn if picture.paper.startswith(b"\x89PNG")]
    assert {picture.group for picture in hatched} == {"fittings"}
    assert sum(len(sheet.images) for sheet in read(pdf).pages) == len(hatched)
    assert all(b"<text" not in picture.paper for picture in drawn)
    bare = as_pdf(field, (), "9.9")
    assert len(pdf) > 2 * len(bare)


def test_the_pdf_speaks_the_units_of_the_page(bench: Reduction) -> None:
    text = words(as_pdf(bench, (), "9.9", US_DISPLAY))
    assert "flow (US gal/min)" in text
    assert "friction slope S (ft/1000 ft)" in text
    assert "flow (L/s)" not in text
    assert "flow (L/s)" in words(as_pdf(bench, (), "9.9", SI_DISPLAY))
