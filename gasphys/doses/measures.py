"""The dose measures: what a piece of an exposure adds, what the sum means, whose limit it has."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import ATMOSPHERE, FSW
from gasphys.doses.cns import CNS_FIT, POPULATIONS, cns_exposure, cns_symptom_risk_of_exposure
from gasphys.doses.oxygen_times import (
    noaa_cns_ramp,
    ramp_fraction,
    usn_closed_circuit_o2_limit,
    usn_remaining_o2_time,
)
from gasphys.doses.pulmonary import (
    HARABIN_FIT,
    POWER_FIT,
    SHYKOFF_BAND,
    arieli_index_from_esot,
    arieli_pulmonary_index,
    esot,
    esot_ramp,
    harabin_vital_capacity_ramp,
    pulmonary_toxicity_incidence,
    shykoff_incidence,
    uptd_ramp,
    vital_capacity_loss,
    vital_capacity_loss_from_index,
)
from gasphys.equation import EquationFunction
from gasphys.errors import unknown_name
from gasphys.exposure import Pieces
from gasphys.policy import weakest

__all__ = [
    "MEASURES",
    "Link",
    "Measure",
    "clipped",
    "closed_circuit",
    "outside_fit",
    "piece_doses",
    "worst_day",
]

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_ROUNDING = 1e-9
_DAY = 24.0 * 60.0


def _no_reason(pieces: Pieces) -> str:
    return "not defined for this exposure"


def _no_caveat(total: Array) -> str:
    return ""


@dataclass(frozen=True)
class Link:
    """One equation on the way from the sum over the pieces to the dose.

    Parameters
    ----------
    equation : EquationFunction
        The equation.
    argument : str
        Its argument that takes the number before.
    given : dict
        Its other arguments.
    """

    equation: EquationFunction
    argument: str
    given: Mapping[str, float] = field(default_factory=dict)

    def __call__(self, number: Array) -> Array:
        """Return what the equation makes of the number before."""
        values = {**self.given, self.argument: number}
        with np.errstate(divide="ignore"):
            return np.asarray(self.equation.raw(*(values[a.name] for a in self.equation.arguments)))


@dataclass(frozen=True)
class Measure:
    """One dose measure: what a piece of an exposure adds, and what the sum means.

    Parameters
    ----------
    quantity : str
        Name in ``quantities.toml``.
    equation : str
        Dotted name of the equation of a ramp.
    kernel : callable
        ``(start_po2, end_po2, duration) -> what the piece adds to the sum`` on arrays [kPa, kPa, min].
    endpoint : str
        What the number stands for.
    population : str
        Whom it was made for.
    provenance : str
        How the numbers are known.
    options : dict
        Keyword arguments of the equation.
    links : tuple of Link
        From the sum over the pieces to the dose: K is the square of a sum, a risk its distribution.
    of_something : bool
        Whether there is no dose where the sum is zero: an intercept says nothing of such an exposure.
    fit : tuple of float
        PO2 the model was fitted to [kPa].
    limit : str
        Id of its limit among the shipped ones; "" where none is published.
    limit_as : callable
        From the limit's quantity to this one.
    whole : callable or None
        ``(pieces, mask) -> dose`` where the measure is no sum over pieces.
    why : callable
        Says why the measure is not defined for these pieces.
    caveat : callable
        Says of the sums where they lie beyond the data; "" where they do not.
    of_one_exposure : bool
        Whether the model knows one exposure only: over several sessions no recovery is counted.
    """

    quantity: str
    equation: str
    kernel: Callable[[Array, Array, Array], Array]
    endpoint: str
    population: str
    provenance: str
    options: Mapping[str, Any] = field(default_factory=dict)
    links: tuple[Link, ...] = ()
    of_something: bool = False
    fit: tuple[float, float] = (0.0, np.inf)
    limit: str = ""
    limit_as: Callable[[float], float] = float
    whole: Callable[[Pieces, Mask], Array] | None = None
    why: Callable[[Pieces], str] = _no_reason
    caveat: Callable[[Array], str] = _no_caveat
    of_one_exposure: bool = False

    def dose(self, total: Array) -> Array:
        """Return the dose that follows from the sum over the pieces.

        Parameters
        ----------
        total : array
            The sum.

        Returns
        -------
        array
            The dose.

        Examples
        --------
        >>> float(MEASURES["arieli_pulmonary_index"].dose(np.array(60.0)))
        1.0
        """
        dose = total
        for link in self.links:
            dose = link(dose)
        return np.where(total > 0.0, dose, np.nan) if self.of_something else dose

    @property
    def is_symptom_risk(self) -> bool:
        """Whether it is a risk of any sign, beside which clinics' seizure rates must stand."""
        return self.quantity == "cns_symptom_risk"


# -- NOAA ------------------------------------------------------------------------------------------


def _noaa(rule: str, total: str) -> Callable[[Array, Array, Array], Array]:
    def kernel(start: Array, end: Array, duration: Array) -> Array:
        return ramp_fraction(start, end, duration, rule, total)

    return kernel


def _above_table(pieces: Pieces) -> str:
    highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
    return (
        f"breathing gas PO2 reaches {highest:.1f} kPa ({highest / ATMOSPHERE:.2f} atm), the NOAA table ends "
        "at 162.1 kPa (1.60 atm) and is not extrapolated"
    )


def worst_day(pieces: Pieces, mask: Mask, rule: str) -> tuple[Array, Array]:
    """Return the largest NOAA share used in any 24 h that begin or end where a piece does.

    Parameters
    ----------
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    mask : array of bool
        Pieces that count.
    rule : str
        Rule between rows of the table.

    Returns
    -------
    tuple of array
        Share [1] and the end of those 24 h [min].

    Examples
    --------
    >>> from gasphys import Exposure
    >>> pieces = Exposure.start("oxygen").stay(150).pieces()
    >>> [float(v) for v in worst_day(pieces, np.ones(1, dtype=bool), "step")]
    [0.5, 150.0]
    """
    kernel = _noaa(rule, "day")

    each = np.where(mask & (pieces.duration > 0.0), kernel(*_ramps(pieces)), 0.0)
    total: Array = each.sum(axis=-1)
    last = np.broadcast_to(pieces.times[..., -1], total.shape)
    if not np.any(pieces.times[..., -1] > _DAY * (1.0 + _ROUNDING)) or np.isnan(total).all():
        return total, last
    shape = each.shape[:-1]
    reached = np.concatenate([np.zeros((*shape, 1)), np.cumsum(each, axis=-1)], axis=-1)
    times = np.broadcast_to(pieces.times, reached.shape)
    ends = np.concatenate([times, np.minimum(times + _DAY, times[..., -1:])], axis=-1)

    def at(moment: Array) -> Array:
        index = (times[..., None, :] <= moment[..., :, None]).sum(axis=-1) - 1
        index = np.clip(index, 0, each.shape[-1] - 1)

        def pick(values: Array) -> Array:
            return np.take_along_axis(np.broadcast_to(values, each.shape), index, axis=-1)

        length = pick(pieces.duration)
        begun = np.take_along_axis(times, index, axis=-1)
        share = np.where(length > 0.0, (moment - begun) / np.where(length > 0.0, length, 1.0), 0.0)
        share = np.clip(share, 0.0, 1.0)
        start, end = pick(pieces.start_po2), pick(pieces.end_po2)
        part = kernel(start, start + (end - start) * share, length * share)
        counts = pick(np.asarray(mask, dtype=float)) > 0.0
        before = np.take_along_axis(reached[..., :-1], index, axis=-1)
        return np.asarray(before + np.where(counts & (length * share > 0.0), part, 0.0))

    with np.errstate(invalid="ignore"):
        window = at(ends) - at(np.maximum(ends - _DAY, 0.0))
    best = np.argmax(np.nan_to_num(window, nan=np.inf), axis=-1)[..., None]
    return (
        np.asarray(np.take_along_axis(window, best, axis=-1)[..., 0]),
        np.asarray(np.take_along_axis(ends, best, axis=-1)[..., 0]),
    )


# -- US Navy closed-circuit oxygen -----------------------------------------------------------------


@dataclass(frozen=True)
class ClosedCircuit:
    """Closed-circuit oxygen time along the pieces, ``(..., segment)``.

    Parameters
    ----------
    on : array of bool
        Pieces on pure oxygen.
    before : array
        Oxygen time counted when the piece begins [min].
    deepest : array
        Greatest depth of this dive before the piece [fsw].
    depths : tuple of array
        Depth at the start and end of the piece [fsw].
    refused : array of bool
        Scenarios that cannot be judged, ``(...)``.
    reason : str
        Why; "" where all can.
    """

    on: Mask
    before: Array
    deepest: Array
    depths: tuple[Array, Array]
    refused: Mask
    reason: str

    def used(self, share: Array, duration: Array) -> Array:
        """Return the share of the permitted time used after a share of each piece."""
        start, end = self.depths
        now = start + (end - start) * share
        deepest = np.maximum(self.deepest, np.maximum(start, now))
        permitted = usn_closed_circuit_o2_limit.raw(
            np.where(self.on, np.clip(deepest, 0.0, 50.0), 0.0), rule="single_depth"
        )
        minutes = np.where(deepest > 50.0 * (1.0 + _ROUNDING), np.nan, self.before + duration * share)
        return np.where(self.on, minutes / permitted, 0.0)


def closed_circuit(pieces: Pieces, mask: Mask) -> ClosedCircuit:
    """Follow the time on pure oxygen, earlier dives less than 2 h before included.

    Parameters
    ----------
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    mask : array of bool
        Pieces that count.

    Returns
    -------
    ClosedCircuit
        Oxygen time and depth along the pieces.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> dive = Exposure.start("oxygen", depth_unit="fsw").travel(depth=25, minutes=1).stay(119)
    >>> found = closed_circuit(dive.pieces(), np.ones(2, dtype=bool))
    >>> float(found.used(np.ones(2), dive.pieces().duration)[-1])
    0.5
    """
    shape = np.broadcast_shapes(pieces.duration.shape, pieces.start_po2.shape, pieces.fractions["O2"].shape)
    duration = np.broadcast_to(pieces.duration, shape)
    pure = np.broadcast_to(pieces.fractions["O2"] >= 1.0 - 1e-6, shape)
    real = duration > 0.0
    on = pure & real & mask
    start = np.broadcast_to((pieces.start_po2 - ATMOSPHERE) / FSW, shape)
    end = np.broadcast_to((pieces.end_po2 - ATMOSPHERE) / FSW, shape)
    before, deepest = np.zeros(shape), np.zeros(shape)
    used, reached, off = (np.zeros(shape[:-1]) for _ in range(3))
    for k in range(shape[-1]):
        breathing, length = on[..., k], duration[..., k]
        again = breathing & (off > 0.0)
        # What an earlier dive takes off the limit, by the equation itself.
        carried = -np.asarray(usn_remaining_o2_time.raw(0.0, used, off))
        used = np.where(again, carried, used)
        reached = np.where(again, 0.0, reached)
        before[..., k], deepest[..., k] = used, reached
        used = np.where(breathing, used + length, used)
        reached = np.where(breathing, np.maximum(reached, np.maximum(start[..., k], end[..., k])), reached)
        off = np.where(breathing, 0.0, off + length)
    other = np.where(real & mask & ~pure, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    none = ~on.any(axis=-1)
    mixed = (other > 0.6 * ATMOSPHERE * (1.0 + _ROUNDING)).any(axis=-1)
    depth = np.where(on, np.maximum(start, end), 0.0).max(axis=-1)
    deep = depth > 50.0 * (1.0 + _ROUNDING)
    if none.all():
        reason = "no pure oxygen is breathed"
    elif mixed.any():
        reason = "not for mixed gas: another gas is breathed at a PO2 above 0.6 atm"
    elif deep.any():
        reason = f"pure oxygen at {depth.max():.1f} fsw; the table ends at 50 fsw and is not extrapolated"
    else:
        reason = "no pure oxygen is breathed" if none.any() else ""
    return ClosedCircuit(on, before, deepest, (start, end), none | mixed | deep, reason)


def _closed_circuit_dose(pieces: Pieces, mask: Mask) -> Array:
    found = closed_circuit(pieces, mask)
    whole = np.ones(found.on.shape)
    used = found.used(whole, np.broadcast_to(pieces.duration, found.on.shape))
    real = pieces.duration > 0.0
    pure = pieces.fractions["O2"] >= 1.0 - 1e-6
    mixed = np.where(real & mask & ~pure, np.maximum(pieces.start_po2, pieces.end_po2), 0.0)
    refused = (mixed > 0.6 * ATMOSPHERE * (1.0 + _ROUNDING)).any(axis=-1) | ~found.on.any(axis=-1)
    return np.where(refused, np.nan, used.max(axis=-1))


def _closed_circuit_reason(pieces: Pieces) -> str:
    mask = np.ones(pieces.duration.shape, dtype=bool)
    return closed_circuit(pieces, mask).reason or _no_reason(pieces)


# -- Shykoff ---------------------------------------------------------------------------------------


def _shykoff(start: Array, end: Array, duration: Array) -> Array:
    """Minutes in the band; NaN where PO2 goes above it."""
    _, _, inside = clipped(start, end, duration, *SHYKOFF_BAND)
    return np.where(np.maximum(start, end) > SHYKOFF_BAND[1] * (1.0 + _ROUNDING), np.nan, inside)


def _shykoff_reason(pieces: Pieces) -> str:
    highest = float(np.nanmax(np.maximum(pieces.start_po2, pieces.end_po2)))
    low, high = SHYKOFF_BAND
    return f"for a PO2 of about 130 kPa ({low:g} to {high:g}) only; here it reaches {highest:.1f} kPa"


# -- The measures ----------------------------------------------------------------------------------


_INDEX = Link(arieli_index_from_esot, "esot")


def _above_250(total: Array) -> str:
    highest = float(np.nanmax(_INDEX(total), initial=0.0))
    return f"K reaches {highest:.0f}, the data about 250; capped at 100 %" if highest > 250.0 else ""


def _esot_kernel(start: Array, end: Array, duration: Array) -> Array:
    return np.asarray(esot_ramp.raw(start, end, duration))


def _symptoms(population: str) -> Measure:
    exposure = cns_exposure.pick(population=population)  # type: ignore[attr-defined]
    risk = cns_symptom_risk_of_exposure.pick(population=population)  # type: ignore[attr-defined]

    def kernel(start: Array, end: Array, duration: Array) -> Array:
        return np.asarray(exposure.raw(start, end, duration))

    return Measure(
        quantity="cns_symptom_risk",
        equation="doses.cns_exposure",
        options={"population": population},
        kernel=kernel,
        links=(Link(risk, "cns_exposure"),),
        endpoint="any nervous system sign, not a seizure probability; no air breaks",
        population=POPULATIONS[population].who
        + (f"; {POPULATIONS[population].remark}" if POPULATIONS[population].remark else ""),
        provenance=risk.provenance,
        fit=CNS_FIT,
        of_one_exposure=True,
    )


_POWER: dict[str, Any] = {
    "equation": "doses.esot_ramp",
    "kernel": _esot_kernel,
    "population": "divers and volunteers on oxygen from about 1 atm up",
    "fit": POWER_FIT,
    "of_one_exposure": True,
}


def _noaa_measure(rule: str, total: str) -> Measure:
    each_day = total == "day"
    return Measure(
        quantity="noaa_cns_fraction",
        equation="doses.noaa_cns_ramp",
        options={"rule": rule, "total": total},
        kernel=_noaa(rule, total),
        endpoint="share of a permitted time in 24 h, not a seizure probability"
        if each_day
        else "share of a permitted time, not a seizure probability",
        population="working divers, 24 h" if each_day else "working divers, one exposure",
        provenance=noaa_cns_ramp.registry[rule, total].provenance,  # type: ignore[attr-defined]
        limit="noaa_cns_day" if each_day else "noaa_cns_single",
        whole=(lambda pieces, mask: worst_day(pieces, mask, rule)[0]) if each_day else None,
        why=_above_table,
    )


#: Every measure by name.
MEASURES: dict[str, Measure] = {
    "uptd": Measure(
        quantity="uptd",
        equation="doses.uptd_ramp",
        options={"exponent": 5.0 / 6.0},
        kernel=lambda a, b, t: np.asarray(uptd_ramp.raw(a, b, t, 5.0 / 6.0)),
        endpoint="pulmonary oxygen dose; no recovery counted",
        population="people at rest, dry and immersed",
        provenance=uptd_ramp.provenance,
        limit="uptd_day_one",
    ),
    "esot": Measure(
        quantity="esot",
        endpoint="pulmonary oxygen dose; minutes of O2 at 1 atm with the same index K",
        provenance=esot_ramp.provenance,
        limit="pulmonary_index_2_days",
        limit_as=lambda index: float(esot.raw(float(ATMOSPHERE), 60.0 * index**0.5)),
        **_POWER,
    ),
    "arieli_pulmonary_index": Measure(
        quantity="arieli_pulmonary_index",
        links=(_INDEX,),
        endpoint="pulmonary oxygen index K: square of a sum, does not add",
        provenance=arieli_pulmonary_index.provenance,
        limit="pulmonary_index_2_days",
        **_POWER,
    ),
    "vital_capacity_loss": Measure(
        quantity="vital_capacity_loss",
        links=(_INDEX, Link(vital_capacity_loss_from_index, "arieli_pulmonary_index")),
        endpoint="mean loss of vital capacity at the end, power equation, no recovery within",
        provenance=vital_capacity_loss.provenance,
        **_POWER,
    ),
    "pulmonary_toxicity_incidence": Measure(
        quantity="pulmonary_toxicity_incidence",
        links=(_INDEX, Link(pulmonary_toxicity_incidence, "arieli_pulmonary_index")),
        endpoint="share of people with pulmonary oxygen toxicity; 1.85 % at no exposure; one data set",
        provenance=pulmonary_toxicity_incidence.provenance,
        caveat=_above_250,
        **_POWER,
    ),
    "harabin_vital_capacity_loss": Measure(
        quantity="vital_capacity_loss",
        equation="doses.harabin_vital_capacity_ramp",
        kernel=lambda a, b, t: np.asarray(harabin_vital_capacity_ramp.raw(a, b, t)),
        endpoint="mean loss of vital capacity at the end, linear form of 1987",
        population="people on continuous oxygen, about 0.8 to 2.5 atm",
        provenance=harabin_vital_capacity_ramp.provenance,
        fit=HARABIN_FIT,
    ),
    "shykoff_incidence": Measure(
        quantity="pulmonary_symptom_incidence",
        equation="doses.shykoff_incidence",
        kernel=_shykoff,
        links=(Link(shykoff_incidence, "duration", {"po2": 130.0}),),
        of_something=True,
        endpoint="share of dives with pulmonary changes or symptoms; 2.70 % at no time at all",
        population="divers at a PO2 of about 130 kPa, 1352 man-dives",
        provenance=shykoff_incidence.provenance,
        why=_shykoff_reason,
    ),
    "noaa_cns": _noaa_measure("step", "single"),
    "noaa_cns_day": _noaa_measure("step", "day"),
    "noaa_cns_linear": _noaa_measure("linear", "single"),
    "noaa_cns_day_linear": _noaa_measure("linear", "day"),
    "usn_closed_circuit_o2": Measure(
        quantity="usn_closed_circuit_o2_fraction",
        equation="doses.usn_closed_circuit_o2_limit",
        options={"rule": "single_depth"},
        kernel=lambda a, b, t: np.full(np.broadcast_shapes(np.shape(a), np.shape(t)), np.nan),
        endpoint="share of the time permitted at the greatest depth, not a seizure probability",
        population="divers on closed-circuit pure oxygen",
        provenance=weakest([usn_closed_circuit_o2_limit.provenance, usn_remaining_o2_time.provenance]),
        limit="usn_closed_circuit_o2",
        whole=_closed_circuit_dose,
        why=_closed_circuit_reason,
    ),
    **{f"cns_risk_{name}": _symptoms(name) for name in POPULATIONS},
}


# -- Pieces ----------------------------------------------------------------------------------------


def _ramps(pieces: Pieces) -> tuple[Array, Array, Array]:
    return pieces.start_po2, pieces.end_po2, pieces.duration


def clipped(start: Array, end: Array, duration: Array, low: float, high: float) -> tuple[Array, Array, Array]:
    """Return the part of each ramp that lies between two pressures: its ends and its length.

    Parameters
    ----------
    start, end, duration : array
        Ramps [kPa, kPa, min].
    low, high : float
        Pressures [kPa].

    Returns
    -------
    tuple of array
        Lower and higher end [kPa], length [min]; a ramp outside has no length.

    Examples
    --------
    >>> [float(v) for v in clipped(np.array(50.0), np.array(150.0), np.array(10.0), 100.0, np.inf)]
    [100.0, 150.0, 5.0]
    """
    below, above = np.minimum(start, end), np.maximum(start, end)
    a, b = np.clip(below, low, high), np.clip(above, low, high)
    span = above - below
    inside = (below >= low * (1.0 - _ROUNDING)) & (above <= high * (1.0 + _ROUNDING))
    share = np.where(span > 0.0, (b - a) / np.where(span > 0.0, span, 1.0), 0.0)
    return a, b, duration * np.where(inside, 1.0, share)


def piece_doses(measure: str, pieces: Pieces) -> Array:
    """Return what each piece adds to the sum of a measure.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    pieces : Pieces
        From :meth:`Exposure.pieces`.

    Returns
    -------
    array
        ``(..., segment)``; NaN where the measure is not defined. The dose is the measure's ``dose``
        of the sum: of K the summand is its square root, in ESOT.

    Raises
    ------
    UnknownNameError
        If there is no such measure.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> exposure = Exposure.start("oxygen").stay(60)
    >>> piece_doses("uptd", exposure.pieces())
    array([60.])
    """
    if measure not in MEASURES:
        raise unknown_name("dose measure", measure, MEASURES)
    with np.errstate(all="ignore"):
        dose = MEASURES[measure].kernel(*_ramps(pieces))
    return np.where(pieces.duration > 0.0, dose, 0.0)


def outside_fit(measure: str, pieces: Pieces, mask: Mask) -> Array:
    """Return the share of a measure's sum that comes from a PO2 it was not fitted to.

    Parameters
    ----------
    measure : str
        A name of :data:`MEASURES`.
    pieces : Pieces
        From :meth:`Exposure.pieces`.
    mask : array of bool
        Pieces that count.

    Returns
    -------
    array
        Share [1], one a scenario; 1 means all of it.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> dive = Exposure.start("air").stay(60)
    >>> float(outside_fit("esot", dive.pieces(), np.ones(1, dtype=bool)))
    1.0
    """
    one = MEASURES[measure]
    if one.fit == (0.0, np.inf):
        return np.zeros(pieces.duration.shape[:-1])
    with np.errstate(all="ignore"):
        each = one.kernel(*_ramps(pieces))
        start, end, duration = clipped(*_ramps(pieces), *one.fit)
        inside = np.where(duration > 0.0, one.kernel(start, end, duration), 0.0)
    total = np.where(mask & (pieces.duration > 0.0), each, 0.0).sum(axis=-1)
    part = np.where(mask, inside, 0.0).sum(axis=-1)
    return np.where(total > 0.0, 1.0 - part / np.where(total > 0.0, total, 1.0), 0.0)
