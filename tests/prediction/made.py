"""What a reduction carries, made by hand: a line of given roughness and properties, with nothing uncertain."""

from __future__ import annotations

from typing import Any

FOOT, INCH = 0.3048, 0.0254


def made_line(
    *,
    diameter: float,
    length: float,
    density: float,
    kinematic_viscosity: float,
    gravity: float = 9.81,
    fittings: tuple[tuple[str, float, float], ...] = (),
    taps: tuple[tuple[str, float, float], ...] = (),
) -> dict[str, Any]:
    """One reach of one wall, SI; fittings and taps as (name, chainage, K or elevation)."""
    return {
        "version": 1,
        "title": "Made by hand",
        "level": 0.95,
        "dof": None,
        "friction_law_u": None,
        "gravity": gravity,
        "temperature": 293.15,
        "fluid": {
            "name": "given",
            "density": {"value": density, "u": None},
            "kinematic_viscosity": {"value": kinematic_viscosity, "u": None},
        },
        "flow_low": None,
        "flow_high": None,
        "reaches": [
            {
                "reach": "main",
                "wall": "pipe",
                "start": 0.0,
                "end": length,
                "diameter": diameter,
                "area": 3.141592653589793 / 4 * diameter**2,
                "laminar_constant": 64.0,
                "circle": True,
            }
        ],
        "fittings": [
            {
                "fitting": name,
                "at": at,
                "reach": 0,
                "loss_coefficient": k,
                "loss_coefficient_u": None,
                "fitted": False,
                "taken_off": [0.0],
                "reason": None,
            }
            for name, at, k in fittings
        ],
        "offtakes": [],
        "taps": [{"tap": name, "chainage": at, "elevation": z} for name, at, z in taps],
        "inputs": [],
        "losses": [],
        "covariance": [],
        "walls": [
            {
                "wall": "pipe",
                "roughness": None,
                "roughness_low": None,
                "roughness_high": None,
                "reynolds_low": None,
                "reynolds_high": None,
                "interval": False,
                "published": None,
                "published_source": None,
                "grid": [],
                "score": [],
                "mean": [],
                "reason": "made by hand",
            }
        ],
        "notes": [],
    }
