"""Write the tables of the outlier search: ``python -m tests.calibration.make_tables``. Seeded; takes some minutes."""

from __future__ import annotations

import argparse
from pathlib import Path

from gradeline.fitting.null import (
    TABLED_RUNS,
    WIDE_PARAMETERS,
    WIDE_RUNS,
    WIDE_SHAPES,
    null_runs,
    simulated_critical_falls,
)
from gradeline.fitting.outliers import most_removable

FOLDER = Path(__file__).parents[2] / "gradeline" / "fitting" / "tables"


def shapes() -> list[tuple[int, int]]:
    """Every (observations, parameters) that is tabled: those in which a reading may be removed."""
    short = [(n, p) for p in range(1, 5) for n in range(p + 3, 15) if int(most_removable(n, p)) > 0]
    return [*short, *((n, p) for p in range(1, WIDE_PARAMETERS + 1) for n in WIDE_SHAPES)]


def main() -> None:
    """Simulate and write both tables."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--count", type=int, default=100_000, help="runs to simulate for each shape")
    parser.add_argument("--wide-count", type=int, default=20_000, help="the same for runs of more than 14")
    asked = parser.parse_args()
    moments, critical = (
        ["observations,parameters,mean,freedom"],
        ["observations,parameters,stated,independent,runs,first,second,third"],
    )
    for n, p in shapes():
        count, tabled = (asked.wide_count, WIDE_RUNS) if n >= WIDE_SHAPES[0] else (asked.count, TABLED_RUNS)
        null = null_runs(n, p, count)
        moments.append(f"{n},{p},{null.expected:.5g},{null.shape:.5g}")
        for stated in (False, True):
            for independent in (False, True):
                for runs in (*tabled, 0):
                    if independent and runs == 1:
                        continue
                    values = simulated_critical_falls(
                        n, p, runs or 10**6, stated=stated, independent=independent, count=count
                    )
                    line = ",".join(f"{value:.4g}" for value in values)
                    critical.append(f"{n},{p},{int(stated)},{int(independent)},{runs},{line}")
        print(n, p, flush=True)
    FOLDER.mkdir(exist_ok=True)
    (FOLDER / "scale_moments.csv").write_text("\n".join(moments) + "\n", encoding="utf-8")
    (FOLDER / "critical_falls.csv").write_text("\n".join(critical) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
