"""Writing whole or not at all, and never over somebody else's files."""

from __future__ import annotations

from pathlib import Path

import pytest

from gradeline.errors import OutputError
from gradeline.reduction.tables import RESULT_TABLES, Reduction
from gradeline.report import FORMATS, swap, write
from gradeline.report import output as output_module
from gradeline.report.figures import pictures


def files(folder: Path) -> dict[str, bytes]:
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


@pytest.fixture(scope="module")
def written(bench: Reduction, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("whole") / "deep" / "reduction"
    write(bench, folder)
    return folder


def test_all_formats_by_default(written: Path, bench: Reduction) -> None:
    names = set(files(written))
    assert {"report.html", "reduction.json", *(f"{table}.csv" for table in RESULT_TABLES)} <= names
    figures = {name.removeprefix("figures/") for name in names if name.startswith("figures/")}
    runs = bench.runs["run"].nunique()
    assert len(figures) == 2 * (runs + 3)
    assert {"residuals.svg", "residuals.png", "slope_velocity.svg", "friction_factor.png"} <= figures
    assert list(written.parent.iterdir()) == [written]  # nothing temporary stays


def test_two_writes_are_equal_to_the_byte(written: Path, bench: Reduction, tmp_path: Path) -> None:
    write(bench, tmp_path / "again")
    assert files(tmp_path / "again") == files(written)


@pytest.mark.parametrize(
    ("formats", "expected"),
    [
        (("json",), {"reduction.json", "carried.json"}),
        (("csv",), {f"{table}.csv" for table in RESULT_TABLES}),
        (("html",), {"report.html"}),
    ],
)
def test_only_the_formats_asked_for(
    field: Reduction, tmp_path: Path, formats: tuple[str, ...], expected: set[str]
) -> None:
    write(field, tmp_path / "out", formats=formats)
    assert set(files(tmp_path / "out")) == expected


@pytest.mark.parametrize("formats", [("docx",), ()])
def test_an_unknown_format_names_the_choices(
    field: Reduction, tmp_path: Path, formats: tuple[str, ...]
) -> None:
    with pytest.raises(OutputError, match="choose from html, json, csv, svg, png, pdf, xlsx"):
        write(field, tmp_path / "out", formats=formats)
    assert list(tmp_path.iterdir()) == []
    assert FORMATS == ("html", "json", "csv", "svg", "png", "pdf", "xlsx")


def test_an_empty_folder_is_taken(field: Reduction, tmp_path: Path) -> None:
    (tmp_path / "out").mkdir()
    write(field, tmp_path / "out", formats=("json",))
    assert set(files(tmp_path / "out")) == {"reduction.json", "carried.json"}


def test_a_folder_with_something_in_it_is_refused(field: Reduction, tmp_path: Path) -> None:
    write(field, tmp_path / "out", formats=("json",))
    before = files(tmp_path / "out")
    with pytest.raises(OutputError, match=r"is not empty \(it holds carried.json\).*--overwrite"):
        write(field, tmp_path / "out", formats=("csv",))
    assert files(tmp_path / "out") == before


def test_overwrite_replaces_an_earlier_report_whole(
    bench: Reduction, field: Reduction, tmp_path: Path
) -> None:
    write(field, tmp_path / "out", formats=("json", "csv", "svg", "png"))
    (tmp_path / "out" / ".DS_Store").write_bytes(b"")  # file managers leave it everywhere
    write(bench, tmp_path / "out", formats=("json",), overwrite=True)
    assert set(files(tmp_path / "out")) == {"reduction.json", "carried.json"}
    assert b"Copper" in files(tmp_path / "out")["reduction.json"]


@pytest.mark.parametrize(
    "foreign",
    [
        "notes.txt",
        "figures/photo.png",
        "figures/grade_lines_holiday.png",
        "extra.csv",
        "sub/report.html",
        "survey.toml",
    ],
)
def test_overwrite_never_removes_what_is_not_ours(field: Reduction, tmp_path: Path, foreign: str) -> None:
    folder = tmp_path / "out"
    write(field, folder, formats=("json", "svg"))
    (folder / foreign).parent.mkdir(exist_ok=True)
    (folder / foreign).write_text("mine")
    before = files(folder)
    named = foreign if foreign.startswith("figures/") else foreign.split("/", maxsplit=1)[0]
    with pytest.raises(OutputError, match=rf"holds {named}, which is no part of a report"):
        write(field, folder, overwrite=True)
    assert files(folder) == before


def test_a_link_is_not_followed_and_not_removed(field: Reduction, tmp_path: Path) -> None:
    (tmp_path / "precious").write_text("mine")
    (tmp_path / "out").mkdir()
    try:
        (tmp_path / "out" / "report.html").symlink_to(tmp_path / "precious")
    except OSError:
        pytest.skip("this system makes no links")
    with pytest.raises(OutputError, match=r"report\.html"):
        write(field, tmp_path / "out", overwrite=True)
    assert (tmp_path / "precious").read_text() == "mine"


def test_a_file_in_the_way_is_refused(field: Reduction, tmp_path: Path) -> None:
    (tmp_path / "out").write_text("mine")
    with pytest.raises(OutputError, match="is a file, not a folder"):
        write(field, tmp_path / "out", overwrite=True)
    with pytest.raises(OutputError):
        write(field, tmp_path / "out" / "below", formats=("json",))
    assert (tmp_path / "out").read_text() == "mine"


@pytest.mark.parametrize("error", [OSError(28, "No space left on device"), ValueError("a fault of ours")])
def test_a_failure_half_way_leaves_everything_as_it_was(
    field: Reduction, bench: Reduction, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: Exception
) -> None:
    write(field, tmp_path / "out", formats=("json",))
    before = files(tmp_path)

    def fail(*_: object, **__: object) -> bytes:
        raise error

    monkeypatch.setattr(output_module, "as_csv", fail)  # after reduction.json was written
    expected = OutputError if isinstance(error, OSError) else ValueError
    with pytest.raises(expected, match=r"No space left|a fault of ours"):
        write(bench, tmp_path / "out", formats=("json", "csv"), overwrite=True)
    with pytest.raises(expected):
        write(bench, tmp_path / "new" / "deep", formats=("json", "csv"))
    assert files(tmp_path) == before
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize("error", [PermissionError(13, "Permission denied"), KeyboardInterrupt()])
def test_the_old_report_comes_back_where_the_swap_fails(
    field: Reduction, bench: Reduction, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: BaseException
) -> None:
    write(field, tmp_path / "out", formats=("json",))
    before = files(tmp_path)
    rename = Path.rename

    def fail(self: Path, target: Path) -> Path:
        if self.name == "new":
            raise error
        return rename(self, target)

    monkeypatch.setattr(
        swap, "exchanged", lambda *_: False
    )  # as where folders cannot be exchanged in one step
    monkeypatch.setattr(Path, "rename", fail)
    expected = OutputError if isinstance(error, OSError) else KeyboardInterrupt
    with pytest.raises(
        expected, match=r"\(Permission denied\); the earlier report there stands unchanged|^$"
    ):
        write(bench, tmp_path / "out", formats=("json",), overwrite=True)
    assert files(tmp_path) == before


def test_an_old_report_that_cannot_come_back_is_kept_and_told(
    field: Reduction, bench: Reduction, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write(field, tmp_path / "out", formats=("json",))
    before = files(tmp_path / "out")
    rename = Path.rename

    def fail(self: Path, target: Path) -> Path:
        if self.name in ("new", "old"):
            raise OSError(5, "Input/output error", str(self))
        return rename(self, target)

    with monkeypatch.context() as broken:
        broken.setattr(swap, "exchanged", lambda *_: False)
        broken.setattr(Path, "rename", fail)
        with pytest.raises(OutputError, match=r"stands whole in .*/\.out-\w{8}/old and comes back") as told:
            write(bench, tmp_path / "out", formats=("json",), overwrite=True)
    aside = str(told.value).partition("stands whole in ")[2].partition(" and comes")[0]
    assert files(Path(aside)) == before
    with pytest.raises(OutputError, match="the earlier report, back from a call that was killed"):
        write(bench, tmp_path / "out", formats=("json",))
    assert files(tmp_path / "out") == before
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize("name", ["bench", "field", "many", "hostile"])
def test_every_figure_is_known_as_ours(name: str, request: pytest.FixtureRequest, tmp_path: Path) -> None:
    reduction = request.getfixturevalue(name)
    write(reduction, tmp_path / "out", formats=("svg",))
    write(reduction, tmp_path / "out", formats=("json",), overwrite=True)  # would be refused otherwise
    names = [picture.name for picture in pictures(reduction, svg=False, png=False)]
    assert len({one.lower() for one in names}) == len(names)
