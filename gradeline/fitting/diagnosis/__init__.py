"""What ails a line, from all runs together: taps, their lines, a loss or a change of slope that nobody listed.

Every suspicion competes with every other for the same readings: an error of one tap (constant, growing with the
velocity head, growing with the slope, or without rule), a single wrong reading, a step or a kink of the grade line.
"""

from gradeline.fitting.diagnosis.findings import Ailment, Break, Diagnosis
from gradeline.fitting.diagnosis.search import diagnose, picked_runs

__all__ = ["NOT_TOLD_APART", "Ailment", "Break", "Diagnosis", "diagnose", "picked_runs"]

#: Two patterns whose χ² differ by less are not told apart (95 % point of χ² with one degree of freedom).
NOT_TOLD_APART = 3.84
