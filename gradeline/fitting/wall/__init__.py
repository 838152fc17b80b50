"""One roughness for a wall from all its turbulent runs, with all that the runs share in one covariance of ln S.

`data`: the slopes, what they depend on, and the law. `covariance`: what moves ln S, as B + J J'. `minimum`: ε of the least
χ². `likelihood`: its interval. `scatter`: what the slopes scatter by about the law, and which stand off it. `trend`: of
ln f over Re. `fit`: all of these, until the set of slopes stands.
"""

from gradeline.fitting.wall.covariance import inverse_covariance, scatter_is_known
from gradeline.fitting.wall.data import WallData, WallFit, example_wall, law_log_slope
from gradeline.fitting.wall.fit import best_roughness, fit_wall
from gradeline.fitting.wall.likelihood import likelihood_rise

__all__ = [
    "WallData",
    "WallFit",
    "best_roughness",
    "example_wall",
    "fit_wall",
    "inverse_covariance",
    "law_log_slope",
    "likelihood_rise",
    "scatter_is_known",
]
