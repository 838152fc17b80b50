"""Every speed that is measured, in one sitting: ``python -m tests.bench``, as ratios to a plain script or the bare engine."""

from __future__ import annotations

import argparse
import runpy
import sys

PARTS = {
    "ratios": ["--rounds", "5"],
    "many": ["--surveys", "100", "--rounds", "1"],
    "logger": ["--gigabytes", "0.2", "--turns", "2"],
}


def main() -> None:
    """Run the parts one after the other."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", maxsplit=1)[0])
    parser.add_argument("parts", nargs="*", choices=[*PARTS, []], help="all of them where none is named")
    asked = parser.parse_args().parts or list(PARTS)
    for part in asked:
        print(f"== {part}", flush=True)
        sys.argv = [part, *PARTS[part]]
        runpy.run_module(f"tests.bench.{part}", run_name="__main__")


if __name__ == "__main__":
    main()
