"""Figures of merit of a switching cycle: what a record holds, how it is measured, how it is judged.

Nothing here knows a deck or a circuit: a simulated cycle and an oscilloscope record are measured alike.
"""

# Importing a module of figures enters them in the register, in the order of the imports.
from transim.measure import pulse, settling, leakage, drive, dissipation, rate  # isort: skip
from transim.measure import static, holdoff, large, overlap, shortest  # isort: skip
from transim.measure.definitions import Definitions, Timing
from transim.measure.limits import Judgement, Limit, Verdict, judge, verdict
from transim.measure.metrics import METRICS, Figure, Metric, extract, metric
from transim.measure.rating import Rating
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = [
    "METRICS",
    "Definitions",
    "Figure",
    "Judgement",
    "Limit",
    "Metric",
    "Rating",
    "Record",
    "Timing",
    "Verdict",
    "Waveform",
    "dissipation",
    "drive",
    "extract",
    "holdoff",
    "judge",
    "large",
    "leakage",
    "metric",
    "overlap",
    "pulse",
    "rate",
    "settling",
    "shortest",
    "static",
    "verdict",
]
