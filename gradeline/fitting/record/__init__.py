"""What a logger's record says, from its blocks: the mean of a window, steady windows, faults.

A block is what is kept of some consecutive samples of a column: their count, mean, squared deviations from it, least and
greatest. `autocorrelation`: the variance of a mean over correlated blocks. `mean_uncertainty`: of a window's mean. `trend`:
trend and step within a window. `changes`: where a record changes. `edges`: where flow and heads change together.
`steady_windows`: what is steady between the changes. `spikes`: single samples far off. `faults`: drift, steps, stuck
transducers, spikes, gaps.
"""

from gradeline.fitting.record.faults import Fault, faults_of
from gradeline.fitting.record.mean_uncertainty import WindowMean, window_mean, window_means
from gradeline.fitting.record.spikes import WithoutSpikes, without_spikes
from gradeline.fitting.record.steady_windows import FoundWindow, steady_windows, stretches

__all__ = [
    "Fault",
    "FoundWindow",
    "WindowMean",
    "WithoutSpikes",
    "faults_of",
    "steady_windows",
    "stretches",
    "window_mean",
    "window_means",
    "without_spikes",
]
