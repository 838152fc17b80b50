"""A coverage-guided fuzz run of the loader, outside the test suite.

    python -m pip install atheris
    nice -n 19 python -m tests.broken.fuzz --minutes 20 FOLDER

One file of a sound survey is replaced by what the fuzzer makes of it. A find is anything but a `GradelineError` or a survey
whose numbers are sound, and anything that takes ten seconds; it is kept in FOLDER, one of each place in the program, as
``BASE/NAME`` with the traceback beside it. Finds that are mended are kept in `tests/broken/finds`.
"""

from __future__ import annotations

import argparse
import hashlib
import io
import random
import re
import sys
import tempfile
import time
import traceback
import zipfile
from pathlib import Path

import atheris

with atheris.instrument_imports(include=["gradeline", "tomllib"]):
    from gradeline.errors import GradelineError
    from gradeline.loader import read_survey

from tests.broken.bases import BASES, write_files
from tests.broken.corpus import CASES, GIVEN, files_of, source_in
from tests.broken.soundness import assert_survey_sound

_SLOW = 10.0
_SHEET = "xl/worksheets/sheet3.xml"


def _targets() -> list[tuple[str, str]]:
    """Every file of every base; of the workbook the part that holds the readings, as a name behind its own."""
    found = [(base, name) for base, make in BASES.items() for name in make()]
    return [*found, ("workbook", f"bench.xlsx/{_SHEET}")]


TARGETS = _targets()
SOUND = {base: make() for base, make in BASES.items()}


def _part(workbook: bytes, part: str) -> bytes:
    with zipfile.ZipFile(io.BytesIO(workbook)) as archive:
        return archive.read(part)


def _with_part(workbook: bytes, part: str, content: bytes) -> bytes:
    out = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(workbook)) as archive, zipfile.ZipFile(out, "w") as packed:
        for name in archive.namelist():
            packed.writestr(name, content if name == part else archive.read(name))
    return out.getvalue()


def survey_of(data: bytes) -> tuple[str, str, bytes]:
    """Return the base, the file and its new content that an input of the fuzzer stands for."""
    base, name = TARGETS[data[0] % len(TARGETS) if data else 0]
    file, _, part = name.partition("/")
    return base, name, _with_part(SOUND[base][file], part, data[1:]) if part else data[1:]


_TOKEN = re.compile(rb"[^\s,=\"\[\]<>]+")


def mutated(data: bytes, most: int, seed: int) -> bytes:
    """Return an input with a word or a line exchanged, doubled or gone, half of the time; else as the engine has it."""
    draw = random.Random(seed)
    text = data[1:]
    words = list(_TOKEN.finditer(text))
    if draw.random() < 0.5 or not words:
        return bytes(atheris.Mutate(data, most))
    if draw.random() < 0.6:
        place, new = draw.choice(words), draw.choice([draw.choice(words)[0], draw.choice(WORDS), b""])
        text = text[: place.start()] + new + text[place.end() :]
    else:
        lines = text.split(b"\n")
        place = draw.randrange(len(lines))
        lines[place : place + 1] = draw.choice(
            ([], [lines[place]] * 2, [draw.choice(lines)], [lines[place], draw.choice(lines)])
        )
        text = b"\n".join(lines)
    return (data[:1] + text)[:most]


def _seeds(folder: Path) -> None:
    """Every file of the bases, and every file of the broken surveys that differs from its base."""
    folder.mkdir(parents=True)
    seeds = set()
    for number, (base, name) in enumerate(TARGETS):
        file, _, part = name.partition("/")
        seeds.add(bytes([number]) + (_part(SOUND[base][file], part) if part else SOUND[base][file]))
    for case in CASES:
        files = files_of(case)
        for name, content in files.items():
            if (
                content != SOUND[case.base].get(name)
                and (case.base, name) in TARGETS
                and len(content) < 20_000
            ):
                seeds.add(bytes([TARGETS.index((case.base, name))]) + content)
    for seed in seeds:
        (folder / hashlib.sha256(seed).hexdigest()[:16]).write_bytes(seed)


def _words() -> list[bytes]:
    """Words of the files, and others that mean something, to put in."""
    words: set[bytes] = set()
    for files in SOUND.values():
        for name, content in files.items():
            if name.endswith((".toml", ".csv")):
                words |= set(content.replace(b",", b" ").replace(b"\n", b" ").split())
    words |= {
        b"nan",
        b"inf",
        b"-inf",
        b"1e999",
        b"1e-320",
        b"\xef\xbb\xbf",
        b"[[",
        b"]]",
        b"+/-",
        b'"""',
        b"sep=;",
        b"?",
    }
    words |= {
        b"1e90",
        b"1e-300",
        b"-0",
        b"0",
        b"-1",
        b"%",
        b"m",
        b"kPa",
        b"[",
        b"]",
        b"{",
        b"}",
        b"true",
        b"'" * 3,
    }
    return sorted(words)


WORDS = _words()


def main() -> None:
    """Run for the minutes that are asked for."""
    options = argparse.ArgumentParser(description=__doc__)
    options.add_argument("--minutes", type=float, default=20.0)
    options.add_argument("folder", type=Path)
    asked = options.parse_args()
    finds: Path = asked.folder / "finds"
    finds.mkdir(parents=True, exist_ok=True)
    survey = Path(tempfile.mkdtemp(prefix="fuzzed-"))
    for base, sound in SOUND.items():
        write_files(survey / base, sound)
    seen: set[str] = set()

    def keep(place: str, base: str, name: str, content: bytes, told: str) -> None:
        if place in seen:
            return
        seen.add(place)
        folder = finds / f"{len(seen):03d}" / base
        folder.mkdir(parents=True)
        (folder / Path(name).name).write_bytes(content)
        (folder.parent / "told.txt").write_text(told, "utf-8")
        print(f"find {len(seen)}: {place}", flush=True)

    def one(data: bytes) -> None:
        base, name, content = survey_of(data)
        folder, file = survey / base, name.partition("/")[0]
        (folder / file).write_bytes(content)
        begun = time.monotonic()
        try:
            given = GIVEN if base == "heads" else {}
            assert_survey_sound(read_survey(source_in(folder, base), **given))
        except GradelineError:
            pass
        except Exception as error:
            last = traceback.extract_tb(error.__traceback__)[-1]
            told = traceback.format_exc()
            keep(f"{type(error).__name__} {last.filename}:{last.lineno}", base, name, data[1:], told)
        taken = time.monotonic() - begun
        (folder / file).write_bytes(SOUND[base][file])
        if taken > _SLOW:
            keep(f"slow {base} {name}", base, name, data[1:], f"{taken:.0f} s")

    seeds, words = asked.folder / "seeds", asked.folder / "words.dict"
    if not seeds.exists():
        _seeds(seeds)
    words.write_text(
        "".join('"' + "".join(f"\\x{byte:02x}" for byte in word) + '"\n' for word in WORDS), "ascii"
    )
    grown = asked.folder / "grown"
    grown.mkdir(exist_ok=True)
    arguments = [
        sys.argv[0],
        f"-max_total_time={60 * asked.minutes:.0f}",
        "-max_len=8000",
        "-timeout=60",
        "-rss_limit_mb=4000",
        f"-dict={words}",
        f"-artifact_prefix={finds}/",
        "-print_final_stats=1",
        str(grown),
        str(seeds),
    ]
    atheris.Setup(arguments, one, custom_mutator=mutated)
    atheris.Fuzz()


if __name__ == "__main__":
    main()
