"""Where the charge of an edge goes: what the driver moves until the RF has switched, and where it is found."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from transim.errors import MeasurementError
from transim.measure.budget import Budget
from transim.measure.record import Record
from transim.measure.waveform import Waveform

__all__ = ["ChargeAccount", "charge_account", "needed_current"]


@dataclass(frozen=True)
class ChargeAccount:
    """Charges of one edge, positive when they go out of the driver.

    Parameters
    ----------
    metric : {"on_time", "off_time"}
        The edge: from the begin of the command's change to the instant that this metric counts to.
    delivered : float
        Integral of the driver's output current [C].
    stored : float
        Change of the charge that the junctions store; of a native diode or transistor with its depletion
        layers [C].
    recombined : float
        Integral of the junctions' conduction current less the change of what they store [C].
    displaced : float
        Charge on capacitances beside the conduction: junction capacitance, bypass, DC blocks, feeds; and what
        leaves past the junctions through resistances [C]. From their own voltages, not from the other terms.
    early : float
        Part of `delivered` that comes before the junction current has turned [C].
    taken : float
        Time after that, in which charge is moved [s].
    """

    metric: Literal["on_time", "off_time"]
    delivered: float
    stored: float
    recombined: float
    displaced: float
    early: float
    taken: float

    @property
    def closing(self) -> float:
        """What is delivered and not found again [C]."""
        return self.delivered - math.fsum((self.stored, self.recombined, self.displaced))

    @property
    def closing_share(self) -> float:
        """Magnitude of `closing` as a share of the largest term; 0 where nothing moves."""
        largest = max(abs(self.delivered), abs(self.stored), abs(self.recombined), abs(self.displaced))
        return abs(self.closing) / largest if largest > 0.0 else 0.0

    @property
    def mean_current(self) -> float:
        """Mean driver current after the junction current has turned, positive out of the driver [A]."""
        return (self.delivered - self.early) / self.taken if self.taken > 0.0 else 0.0


def charge_account(record: Record, budget: Budget) -> ChargeAccount:
    """Account for the charge of an edge.

    Parameters
    ----------
    record : Record
        The cycle, with the driver's current, the charge and the conduction current of the junctions, and the
        charge on the other capacitances.
    budget : Budget
        Of the edge.

    Returns
    -------
    ChargeAccount

    Raises
    ------
    MeasurementError
        If one of these is not recorded, or the edge ends before it begins.
    """
    edge = record.timing.on_window() if budget.metric == "on_time" else record.timing.off_window()
    begin, end = edge[0], budget.end
    turned = end - budget.total + budget.fixed
    if record.drive_current is None:
        raise MeasurementError("no driver current in this record")
    fed = record.junction_fed
    if not fed or not all(name in record.junction_charge and name in record.junction_conduction for name in fed):
        raise MeasurementError("no charge and conduction current of the junctions that the driver feeds")
    if not record.other_charge:
        raise MeasurementError("no charge on the other capacitances in this record")
    if end <= begin:
        raise MeasurementError("the RF switches before the command does")
    stored = math.fsum(sign * _change(record.junction_charge[name], begin, end) for name, sign in fed.items())
    conducted = math.fsum(
        sign * record.junction_conduction[name].between(begin, end).integral() for name, sign in fed.items()
    )
    return ChargeAccount(
        metric=budget.metric,
        delivered=record.drive_current.between(begin, end).integral(),
        stored=stored,
        recombined=conducted - stored,
        displaced=math.fsum(_change(wave, begin, end) for wave in record.other_charge.values()),
        early=record.drive_current.between(begin, turned).integral() if turned > begin else 0.0,
        taken=end - turned,
    )


def needed_current(account: ChargeAccount, budget: Budget, limit: float) -> float | None:
    """Return the current that would switch the RF within a limit.

    Parameters
    ----------
    account : ChargeAccount
        Of the edge.
    budget : Budget
        Of the same edge.
    limit : float
        Longest permitted time [s].

    Returns
    -------
    float or None
        Constant driver current during the part that is not fixed, as a magnitude [A]; None if the fixed parts
        alone take as long as the limit.

    Notes
    -----
    The same charge has to be stored or removed, and displaced, in less time, and the more is lost to
    recombination the longer it takes: I = |stored + displaced + recombined r - early| / (limit - fixed), where r
    is the ratio of the time that the limit leaves to the time that was taken (a straight line through zero).
    """
    available = limit - budget.fixed
    if available <= 0.0 or account.taken <= 0.0:
        return None
    charge = account.stored + account.displaced + account.recombined * available / account.taken
    return abs(charge - account.early) / available


def _change(wave: Waveform, begin: float, end: float) -> float:
    return wave.at(end).real - wave.at(begin).real
