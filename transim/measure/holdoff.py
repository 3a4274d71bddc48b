"""What the RF itself does to the junctions at its stated level: hold-off, charge margin, modulation."""

from __future__ import annotations

import math
from collections.abc import Callable

from transim.errors import MeasurementError
from transim.measure.metrics import metric
from transim.measure.record import Record
from transim.measure.rf import JunctionRf, RfStress

__all__ = ["charge_margin", "holdoff_bias_margin", "holdoff_peak_margin", "rf_modulation", "smallest_reverse_bias"]

_MIL = 25.4e-6


def smallest_reverse_bias(peak: float, frequency: float, width: float, duty: float = 1.0) -> float:
    """Return the smallest reverse bias that holds a p-i-n diode off [V].

    Parameters
    ----------
    peak : float
        RF peak voltage across the diode [V].
    frequency : float
        Carrier [Hz].
    width : float
        Width of the I-region [m].
    duty : float
        Duty factor of the RF, 1 for continuous wave.

    Returns
    -------
    float
        Magnitude of the bias; the peak itself in the low-frequency limit, less where carriers have no time
        to cross the I-region.

    References
    ----------
    R. H. Caverly, G. Hiller, IEEE Trans. Microwave Theory Tech. 38(12), 1990: |Vdc| = V/sqrt(1 + [(0.0142 f W^2 /
    (V sqrt D)) sqrt(1 + (0.056 V sqrt D/W)^2)]^2), f in MHz, W in mils; coefficients from memory.

    Examples
    --------
    >>> round(smallest_reverse_bias(500.0, 300e6, 10 * 25.4e-6), 2)
    183.59
    """
    if peak <= 0.0:
        return 0.0
    mils, effective = width / _MIL, peak * math.sqrt(duty)
    transit = 0.0142 * frequency / 1e6 * mils**2 / effective * math.hypot(1.0, 0.056 * effective / mils)
    return peak / math.hypot(1.0, transit)


def _stress(record: Record) -> RfStress:
    if record.stress is None:
        raise MeasurementError("known to the envelope analysis only")
    return record.stress


def _smallest(record: Record, off: bool, figure: Callable[[JunctionRf], float | None], reason: str) -> float:
    found = [figure(junction) for junction in _stress(record).junctions if junction.off == off]
    values = [value for value in found if value is not None]
    if not values:
        raise MeasurementError(reason)
    return min(values)


@metric(
    "holdoff_peak_margin",
    unit="V",
    title="Reverse bias above the RF peak, junctions that are off",
    analysis="envelope",
)
def holdoff_peak_margin(record: Record) -> float:
    """Return the smallest difference of reverse bias and RF peak voltage of any junction that is off [V].

    Negative: the RF swings the junction forward. A junction needs some tenths of a volt forward to conduct, so a
    slightly negative margin need not matter; a warning of the run and the carrier analysis tell.
    """
    return _smallest(
        record, True, lambda junction: junction.reverse - junction.voltage, "no junction is off in either state"
    )


@metric(
    "holdoff_bias_margin",
    unit="V",
    title="Reverse bias above the smallest that holds off the RF",
    analysis="envelope",
)
def holdoff_bias_margin(record: Record) -> float:
    """Return the smallest difference of reverse bias and the bias that `smallest_reverse_bias` asks for [V]."""

    def margin(junction: JunctionRf) -> float | None:
        if junction.width is None:
            return None
        return junction.reverse - smallest_reverse_bias(junction.voltage, record.carrier, junction.width)

    return _smallest(record, True, margin, "no junction whose part has a width is off in either state")


@metric(
    "charge_margin",
    unit="1",
    title="Stored charge over that of the RF, junctions that are on",
    analysis="envelope",
)
def charge_margin(record: Record) -> float:
    """Return the smallest 2 pi f Q / Ipk of any junction that is on (in steady state Q = IF tau).

    References
    ----------
    J. F. White, Microwave Semiconductor Engineering, 1982.
    """
    omega = 2.0 * math.pi * record.carrier

    def margin(junction: JunctionRf) -> float | None:
        if junction.charge is None or junction.current <= 0.0:
            return None
        return omega * junction.charge / junction.current

    return _smallest(record, False, margin, "no junction with a known charge is on in either state")


@metric(
    "rf_modulation",
    unit="1",
    title="RF across conducting junctions in N Vt, during transitions",
    analysis="envelope",
)
def rf_modulation(record: Record) -> float:
    """Return the largest RF amplitude across a conducting junction while RF goes from 10 to 90 %, in units of N Vt.

    Where it is not small against one, the RF changes the transition that the envelope analysis assumes.
    """
    value = _stress(record).modulation
    if value is None:
        raise MeasurementError("the RF does not cross both 10 % and 90 % of its on level")
    return value
