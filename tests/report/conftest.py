"""Invented reductions, made here from a stated truth: no pipe, bench or main behind them exists."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pandas as pd
import pytest

from gradeline.reduction.tables import DRAWING_TABLES, RESULT_TABLES, Reduction

G = 9.81
NU = 1.004e-6
NAN = float("nan")


def frame(table: str, rows: list[dict[str, object]]) -> pd.DataFrame:
    """A table with exactly the columns of the contract, in order and of their kinds."""
    columns = {**RESULT_TABLES, **DRAWING_TABLES}[table]
    data: dict[str, pd.Series] = {}
    for name, column in columns.items():
        cells = [row.get(name) for row in rows]
        if column.kind == "number":
            data[name] = pd.Series([NAN if cell is None else cell for cell in cells], dtype=float)
        elif column.kind == "truth":
            data[name] = pd.Series([pd.NA if cell is None else cell for cell in cells], dtype="boolean")
        else:
            data[name] = pd.Series(cells, dtype=object)
    return pd.DataFrame(data)


def colebrook(re: float, relative: float) -> float:
    """Colebrook-White by fixed point, or 64/Re below 2000."""
    if re < 2000:
        return 64 / re
    x = 7.0
    for _ in range(60):
        x = -2 * math.log10(relative / 3.7 + 2.51 * x / re)
    return 1 / x**2


def regime_of(re: float) -> str:
    return "static" if re == 0 else "laminar" if re < 2000 else "critical" if re < 4000 else "turbulent"


def reduction_of(
    *,
    title: str,
    reaches: list[tuple[str, str, float, float, float, float]],  # name, wall, start, end, diameter, roughness
    taps: list[tuple[str, float, float]],  # name, chainage, elevation
    flows: list[float],
    level_0: float,
    sigma: float,
    fittings: list[tuple[str, float, float]] = (),  # name, chainage, K
    wrong: dict[tuple[str, str], float] = {},  # noqa: B006 (never changed)
    disturbed: tuple[str, ...] = (),
    gauge: str = "board",
    unit: str = "length",
    seed: int = 7,
    cautions: tuple[str, ...] = (),
) -> Reduction:
    """Simulate heads along a line and lay them out as a reduction would."""
    rng = np.random.default_rng(seed)
    runs, heads, lines, flags, exponents = [], [], [], [], []
    chainages = np.array([tap[1] for tap in taps])
    for n, flow in enumerate(flows):
        run = f"R{n + 1}" if flow else "S0"
        parts = []
        for name, _, start, end, bore, roughness in reaches:
            velocity = flow / (math.pi * bore**2 / 4)
            re = velocity * bore / NU
            f = colebrook(re, roughness / bore) if flow else NAN
            parts.append(
                (name, start, end, bore, velocity, re, f, f * velocity**2 / (2 * G * bore) if flow else 0.0)
            )

        def line(x: float, parts: list = parts) -> tuple[float, float]:
            energy = level_0
            velocity_head = 0.0
            for _, start, end, _, velocity, _, _, slope in parts:
                if x >= start:
                    energy -= slope * (min(x, end) - start)
                    velocity_head = velocity**2 / (2 * G)
            for _, at, k in fittings:
                if x > at:
                    energy -= k * velocity_head
            return energy, velocity_head

        places = sorted(
            {reaches[0][2], reaches[-1][3], *chainages}
            | {p for part in parts for p in (part[1], part[2], part[2] + 1e-6) if p <= reaches[-1][3]}
            | {p for _, at, _ in fittings for p in (at, at + 1e-6)}
        )
        for x in places:
            energy, velocity_head = line(x)
            elevation = float(np.interp(x, chainages, [tap[2] for tap in taps]))
            bore = next(part[3] for part in reversed(parts) if x >= part[1])
            middle = (x - chainages.mean()) / (np.ptp(chainages) / 2)
            lines.append(
                {
                    "run": run,
                    "chainage": x,
                    "energy_head": energy,
                    "energy_head_u": sigma * math.sqrt(1 + 3 * middle**2) / math.sqrt(len(taps)),
                    "piezometric_head": energy - velocity_head,
                    "velocity_head": velocity_head,
                    "elevation": elevation,
                    "crown": elevation + bore / 2,
                }
            )
        used_count = 0
        for tap, x, _ in taps:
            energy, velocity_head = line(x)
            slip = wrong.get((run, tap), 0.0)
            residual = rng.normal(0, sigma) + slip
            left_out = tap in disturbed
            flag = "outlier" if slip else "disturbed" if left_out else None
            used = flag is None
            used_count += used
            reason = None
            if flag == "outlier":
                reason = f"off the fitted line by {slip * 1e3:+.1f} mm"
            elif flag == "disturbed":
                reason = "2.1 bores downstream of the valve"
            heads.append(
                {
                    "run": run,
                    "gauge": gauge,
                    "tap": tap,
                    "chainage": x,
                    "head": energy - velocity_head + residual,
                    "energy_head": energy + residual,
                    "fitted_head": energy,
                    "residual": residual,
                    "standardized_residual": residual / sigma,
                    "used": used,
                    "flag": flag,
                    "reason": reason,
                }
            )
            if slip:
                scale = 1000 * G if unit == "pressure" else 1.0
                reading = energy - velocity_head - 0.1
                flags.append(
                    {
                        "kind": "reading",
                        "run": run,
                        "tap": tap,
                        "reading": (reading + slip) * scale,
                        "expected": reading * scale,
                        "score": slip / sigma,
                        "suggestion": f"a slip of {abs(slip) * 1e3:.0f} mm of water; read again if the run can be repeated",
                    }
                )
        for name, start, end, bore, velocity, re, f, slope in parts:
            u = sigma / (end - start) * math.sqrt(12 / len(taps))
            measured = slope + rng.normal(0, u / 2) if flow else NAN
            f_measured = f * measured / slope if flow else NAN
            f_u = f_measured * math.hypot(u / measured, 0.006) if flow else NAN
            turbulent = regime_of(re) == "turbulent"
            signed = (
                3.7 * bore * (10 ** (-1 / (2 * math.sqrt(f_measured))) - 2.51 / (re * math.sqrt(f_measured)))
                if turbulent
                else NAN
            )
            reason = None
            if not flow:
                reason = "static run: no flow, no slope"
            elif not turbulent:
                reason = f"{regime_of(re)}: f says nothing of the roughness"
            elif signed < 0:
                reason = "f lies below the smooth law"
            runs.append(
                {
                    "run": run,
                    "reach": name,
                    "flow": flow,
                    "velocity": velocity,
                    "temperature": 293.15,
                    "density": 998.2,
                    "kinematic_viscosity": NU,
                    "reynolds": re,
                    "regime": regime_of(re),
                    "slope": measured,
                    "slope_u": u if flow else NAN,
                    "slope_u_random": u * 0.9 if flow else NAN,
                    "slope_dof": used_count - 2,
                    "slope_low": measured - 2.2 * u,
                    "slope_high": measured + 2.2 * u,
                    "friction_factor": f_measured,
                    "friction_factor_u": f_u,
                    "friction_factor_low": f_measured - 2.2 * f_u,
                    "friction_factor_high": f_measured + 2.2 * f_u,
                    "roughness": signed if signed >= 0 else NAN,
                    "roughness_low": 0.0 if signed >= 0 else NAN,
                    "roughness_high": signed * 3 if signed >= 0 else NAN,
                    "roughness_signed": signed,
                    "observations_used": used_count,
                    "straightness_p": 0.4,
                    "reason": reason,
                }
            )
    walls, sensitivity = [], []
    for name, wall, _, _, bore, roughness in reaches:
        for regime, exponent in (("laminar", 1.004), ("turbulent", 1.79)):
            own = [row for row in runs if row["reach"] == name and row["regime"] == regime]
            exponents.append(
                {
                    "reach": name,
                    "regime": regime,
                    "exponent": exponent if len(own) > 1 else NAN,
                    "exponent_u": 0.012 if len(own) > 1 else NAN,
                    "exponent_low": exponent - 0.03 if len(own) > 1 else NAN,
                    "exponent_high": exponent + 0.03 if len(own) > 1 else NAN,
                    "runs_used": len(own),
                    "reason": None if len(own) > 1 else f"{len(own)} {regime} runs; an exponent needs two",
                }
            )
        resolved = roughness / bore > 1e-4
        walls.append(
            {
                "wall": wall,
                "roughness": roughness,
                "roughness_low": roughness * 0.7 if resolved else 0.0,
                "roughness_high": roughness * 1.4 if resolved else roughness * 3,
                "roughness_upper95": roughness * 1.33 if resolved else roughness * 2.6,
                "roughness_resolved": resolved,
                "hydraulically_smooth": not resolved,
                "roughness_reynolds": 21.4 if resolved else 0.42,
                "law_trend": -0.004,
                "law_trend_u": 0.011,
                "runs_used": sum(row["reach"] == name and row["regime"] == "turbulent" for row in runs),
                "hazen_williams_c": NAN,
                "manning_n": NAN,
                "reason": None
                if resolved
                else "the interval reaches down to 0: the runs cannot tell it from a smooth wall",
            }
        )
        sensitivity += [
            {
                "wall": wall,
                "diameter_change": change,
                "friction_factor_change": (1 + change) ** 5 - 1,
                "roughness": max(0.0, roughness * (1 + 25 * change)),
            }
            for change in (-0.01, -0.005, 0.0, 0.005, 0.01)
        ]
    tables = {
        "reaches": [
            {
                "reach": r[0],
                "wall": r[1],
                "length": r[3] - r[2],
                "diameter": r[4],
                "shared_curve_p": NAN,
                "reason": "not tested: the curve of all runs is tested against tap errors only from six taps",
            }
            for r in reaches
        ],
        "runs": runs,
        "walls": walls,
        "fittings": [
            {
                "fitting": name,
                "loss_coefficient": k,
                "loss_coefficient_u": 0.04,
                "loss_coefficient_low": k - 0.09,
                "loss_coefficient_high": k + 0.09,
                "equivalent_length": 4.1,
                "reason": None,
            }
            for name, _, k in fittings
        ],
        "taps": [
            {
                "tap": tap[0],
                "offset": rng.normal(0, 3e-4),
                "offset_u": 2e-4,
                "edge_coefficient": NAN,
                "edge_coefficient_u": NAN,
                "diagnosis": None,
                "reason": "not examined",
            }
            for tap in taps
        ],
        "heads": heads,
        "flags": flags,
        "budget": [],
        "grade_lines": lines,
        "layout": [
            {"what": "tap", "name": t[0], "chainage": t[1], "elevation": t[2], "note": None} for t in taps
        ]
        + [
            {
                "what": "fitting",
                "name": f[0],
                "chainage": f[1],
                "elevation": float(np.interp(f[1], chainages, [t[2] for t in taps])),
                "note": None,
            }
            for f in fittings
        ],
        "laminar": [
            {
                "run": row["run"],
                "reach": row["reach"],
                "ratio": row["friction_factor"] * row["reynolds"] / 64,
                "ratio_u": row["friction_factor_u"] * row["reynolds"] / 64,
                "constant": 64.0,
            }
            for row in runs
            if row["regime"] == "laminar"
        ],
        "reading_units": [
            {
                "tap": t[0],
                "gauge": gauge,
                "kind": "pressure gauge" if unit == "pressure" else "piezometer",
                "unit": "kPa" if unit == "pressure" else "mm",
                "si_per_unit": 1e3 if unit == "pressure" else 1e-3,
            }
            for t in taps
        ],
        "exponents": exponents,
        "scatter": [{"gauge": gauge, "base": sigma, "surge": 0.002, "stated": NAN, "dof": 61, "note": None}],
        "bore_sensitivity": sensitivity,
        "losses": [
            {
                "fitting": name,
                "kind": "gate valve",
                "length": 0.0,
                "runs_used": sum(flow > 0 for flow in flows),
                "taps_upstream": 3,
                "taps_downstream": 4,
                "reynolds": 3.1e5,
                "equivalent_length_u": 0.21,
                "published": 0.11,
                "published_low": 0.06,
                "published_high": 0.17,
                "published_for": "gate valve fully open",
                "source": "a handbook",
                "verdict": "above",
                "trend": -0.12,
                "trend_u": 0.2,
                "trend_p": 0.55,
                "depends_on_reynolds": False,
            }
            for name, _, _ in fittings
        ],
        "loss_runs": [
            {
                "run": row["run"],
                "fitting": name,
                "reynolds": row["reynolds"],
                "loss_coefficient": k + 0.02 * (-1) ** n,
                "loss_coefficient_u": 0.05,
                "used": n > 0,
                "reason": None if n else "off the friction law",
            }
            for name, _, k in fittings
            for n, row in enumerate(run for run in runs if run["reach"] == reaches[0][0] and run["reynolds"])
        ],
        "inputs": [
            {"group": "fluid", "name": "water", "what": "name", "text": "water"},
            {"group": "gauge", "name": gauge, "what": "kind", "text": "piezometer"},
            {
                "group": "gauge",
                "name": gauge,
                "what": "u of a reading",
                "quantity": "small head",
                "value": sigma,
            },
            {"group": "gauge", "name": gauge, "what": "u of the scale", "quantity": "relative"},
            {
                "group": "stated",
                "what": "flow of a run, random",
                "quantity": "relative",
                "value": 0.004,
            },
            {"group": "stated", "what": "chainage of a tap", "quantity": "small head"},
            {"group": "options", "what": "level of the intervals", "quantity": "relative", "value": 0.95},
            {"group": "options", "what": "single readings", "text": "judged"},
        ],
        "stated_reaches": [
            {"reach": r[0], "wall": r[1], "start": r[2], "end": r[3], "diameter": r[4], "diameter_u": 3e-5}
            for r in reaches
        ],
        "stated_taps": [{"tap": t[0], "chainage": t[1], "elevation": t[2], "gauge": gauge} for t in taps],
        "raw_readings": [
            {
                "run": head["run"],
                "tap": head["tap"],
                "reading": (head["head"] - 0.1) * (1000 * G if unit == "pressure" else 1.0),
                "repeats": 1,
            }
            for head in heads
        ],
    }
    return Reduction(
        survey={
            "title": title,
            "date": "2026-05-06",
            "source": "invented",
            "files": {"survey.toml": "0" * 64, "taps.csv": "1a" * 32, "readings.csv": "ab" * 32},
        },
        assumptions=(
            "gravity is 9.80665 m/s²: the survey gives neither latitude nor gravity",
            "no tap elevation is given: the axis is taken as level at 0 m",
        ),
        cautions=cautions,
        level=0.95,
        gravity=9.80665,
        friction_law_u=0.02,
        **{name: frame(name, tables.get(name, [])) for name in (*RESULT_TABLES, *DRAWING_TABLES)},
    )


def make_bench(**changes: object) -> Reduction:
    """Ten taps on a copper pipe, nine flowing runs and a static one, one wrong reading."""
    area = math.pi * 0.02664**2 / 4
    reynolds = [0, 900, 1700, 2900, 5200, 9000, 16000, 28000, 40000, 61000]
    return reduction_of(
        title="Copper test length, invented bench",
        reaches=[("test length", "copper", 0.0, 5.5, 0.02664, 1.2e-6)],
        taps=[(f"T{n + 1}", 0.25 + n * 5.0 / 9, 0.0) for n in range(10)],
        flows=[re * NU / 0.02664 * area for re in reynolds],
        level_0=1.25,
        sigma=6e-4,
        wrong={("R7", "T4"): 0.012},
        cautions=("the flow meter's uncertainty is not stated and counts for nothing",),
        **changes,
    )


def make_field(**changes: object) -> Reduction:
    """An invented field line of two bores over a hill, with a valve whose K was fitted."""
    names = ["P1", "P2", "P3", "P4", "P5", "P6", "P7", "P8", "P9"]
    at = [20, 140, 260, 395, 415, 560, 700, 840, 980]
    high = [12.0, 15.0, 22.5, 31.0, 32.0, 24.0, 16.0, 11.0, 9.0]
    settings: dict[str, object] = {
        "title": "Cast main, invented",
        "reaches": [
            ("upper main", "cast iron", 0.0, 600.0, 0.25, 4e-4),
            ("lower main", "lined", 600.0, 1000.0, 0.2, 5e-5),
        ],
        "taps": list(zip(names, map(float, at), high, strict=True)),
        "flows": [0.03, 0.045, 0.06, 0.07],
        "level_0": 40.0,
        "sigma": 0.08,
        "fittings": [("gate valve", 410.0, 2.4)],
        "wrong": {("R3", "P8"): -1.9},
        "disturbed": ("P5",),
        "gauge": "dial",
        "unit": "pressure",
        "cautions": ("run R4: the hydraulic grade line lies below the pipe's crown at P5",),
    }
    return reduction_of(**{**settings, **changes})


def make_many(runs: int = 30) -> Reduction:
    """More runs than get a figure each."""
    area = math.pi * 0.02664**2 / 4
    return reduction_of(
        title="Many runs, invented",
        reaches=[("test length", "copper", 0.0, 5.5, 0.02664, 1.2e-6)],
        taps=[(f"T{n + 1}", 0.25 + n * 5.0 / 9, 0.0) for n in range(10)],
        flows=[re * NU / 0.02664 * area for re in np.geomspace(900, 61000, runs)],
        level_0=1.25,
        sigma=6e-4,
        wrong={("R7", "T4"): 0.012, ("R21", "T9"): -0.02},
    )


@pytest.fixture(scope="session")
def bench() -> Reduction:
    return make_bench()


@pytest.fixture(scope="session")
def field() -> Reduction:
    return make_field()


@pytest.fixture(scope="session")
def many() -> Reduction:
    return make_many()


@pytest.fixture(scope="session")
def hostile(bench: Reduction) -> Reduction:
    """The bench with names that would run as script or as a formula if they were let through."""
    evil = "<script>alert('x')</script>&\"$\\frac{1}{2}$"
    heads, layout, flags, runs = (
        bench.heads.copy(),
        bench.layout.copy(),
        bench.flags.copy(),
        bench.runs.copy(),
    )
    heads["tap"] = heads["tap"].replace({"T4": evil})
    layout["name"] = layout["name"].replace({"T4": evil})
    flags["tap"] = flags["tap"].replace({"T4": evil})
    flags.loc[0, "suggestion"] = '=HYPERLINK("http://x")'
    runs["run"] = runs["run"].replace({"R2": "=2+3", "R3": "-5", "R7": "../../etc"})
    heads["run"] = heads["run"].replace({"R2": "=2+3", "R3": "-5", "R7": "../../etc"})
    lines = bench.grade_lines.copy()
    lines["run"] = lines["run"].replace({"R2": "=2+3", "R3": "-5", "R7": "../../etc"})
    return dataclasses.replace(
        bench,
        survey={**bench.survey, "title": evil + "]]></svg>"},
        heads=heads,
        layout=layout,
        flags=flags,
        runs=runs,
        grade_lines=lines,
        cautions=(*bench.cautions, "<img src=x onerror=alert(1)>"),
    )


@pytest.fixture
def make():
    """The three makers, for a test that wants its own."""
    return {"bench": make_bench, "field": make_field, "many": make_many}
