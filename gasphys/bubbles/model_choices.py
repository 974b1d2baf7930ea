"""The varying-permeability model: its choices and numbers, each with a name."""

from __future__ import annotations

import dataclasses
import functools
import hashlib
import math
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib import resources
from typing import Any

import numpy as np
from numpy.typing import NDArray

from gasphys.constants import (
    VPM_CRITICAL_VOLUME,
    VPM_HELIUM_RADIUS,
    VPM_NITROGEN_RADIUS,
    VPM_ONSET,
    VPM_OTHER_GASES,
    VPM_REGENERATION_TIME,
    VPM_SKIN_COMPRESSION,
    VPM_SURFACE_TENSION,
)
from gasphys.errors import RangeError, ValidityError, unknown_name
from gasphys.policy import weakest
from gasphys.tissues.sets import TissueSet, load

__all__ = ["EVIDENCE", "OPTIONS", "VaryingPermeability", "bubble_model", "models", "varying_permeability"]

Array = NDArray[np.float64]

#: Options by name: what they may be, the sheet's default first.
OPTIONS: dict[str, tuple[Any, ...]] = {
    "crushing_offset": (True, False),
    "regeneration_clock": ("greatest_crushing", "leaving_surface"),
    "decompression_time": ("first_supersaturated_depth", "leaving_bottom"),
    "surface_time": ("excess", "half_time"),
    "mixing": ("tension", "smaller"),
    "tested": ("on_arrival", "before_leaving"),
    "boyle_expansion": (False, True, "every_pass"),
}

#: Root of the ratio of molar masses: helium's half-times where none are given, own reading.
_GRAHAM = 2.6455

#: File of half-times and texts of each model.
_FILES = {"yount_hoffman_1986": "yount_hoffman_1986.toml"}


@functools.cache
def _shipped(name: str) -> TissueSet:
    with resources.as_file(resources.files("gasphys.bubbles").joinpath(_FILES[name])) as path:
        return load(path)


def models() -> tuple[str, ...]:
    """Return the names of the bubble models that plan ascents.

    Returns
    -------
    tuple of str
        For :func:`gasphys.ascent.plan` and :func:`varying_permeability`.

    Examples
    --------
    >>> models()
    ('yount_hoffman_1986',)
    """
    return tuple(_FILES)


#: What the one large trial of stops redistributed by a bubble model found.
EVIDENCE = _shipped("yount_hoffman_1986").evidence


@dataclass(frozen=True, eq=False, repr=False)
class VaryingPermeability:
    """A varying-permeability model with all its choices.

    Parameters
    ----------
    tissues : TissueSet
        Compartments and what reaches them; name, texts and provenance of the model.
    nitrogen_radius, helium_radius : float
        Initial critical radii [um].
    surface_tension, skin_compression : float
        Of the skin of a nucleus [N/m].
    regeneration_time : float
        Time constant of healing [min].
    critical_volume : float
        Critical-volume parameter [kPa min]; 0: the least gradients.
    onset : float
        Crushing gradient at which the skin closes [kPa].
    other_gases : float
        Other gases in tissue [kPa].
    crushing_offset : bool
        Whether the unsaturation at the start is subtracted from the crushing pressure.
    regeneration_clock : {"greatest_crushing", "leaving_surface"}
        Since when a nucleus heals.
    decompression_time : {"first_supersaturated_depth", "leaving_bottom"}
        Where the decompression time begins.
    surface_time : {"excess", "half_time"}
        How the surface phase counts: the excess of both gases, or half-time/ln 2.
    mixing : {"tension", "smaller"}
        Gradient where both gases are present: weighted by tension, or the smaller. Own reading.
    tested : {"on_arrival", "before_leaving"}
        When the limit of the next stop is tested.
    boyle_expansion : bool or "every_pass"
        Whether the gradients of shallower stops shrink as a critical bubble of the first stop expands: in the
        last pass, or inside every pass.

    Notes
    -----
    All constants are from memory, unverified; see the documentation for what sources disagree on.
    """

    tissues: TissueSet
    nitrogen_radius: float = float(VPM_NITROGEN_RADIUS)
    helium_radius: float = float(VPM_HELIUM_RADIUS)
    surface_tension: float = float(VPM_SURFACE_TENSION)
    skin_compression: float = float(VPM_SKIN_COMPRESSION)
    regeneration_time: float = float(VPM_REGENERATION_TIME)
    critical_volume: float = float(VPM_CRITICAL_VOLUME)
    onset: float = float(VPM_ONSET)
    other_gases: float = float(VPM_OTHER_GASES)
    crushing_offset: bool = True
    regeneration_clock: str = "greatest_crushing"
    decompression_time: str = "first_supersaturated_depth"
    surface_time: str = "excess"
    mixing: str = "tension"
    tested: str = "on_arrival"
    boyle_expansion: bool | str = False

    def __post_init__(self) -> None:
        for name, valid in OPTIONS.items():
            given = getattr(self, name)
            if not any(given is v or (isinstance(v, str) and given == v) for v in valid):
                raise unknown_name(name, str(given), [str(v) for v in valid])
        for name in ("nitrogen_radius", "helium_radius", "surface_tension", "regeneration_time", "onset"):
            if not 0.0 < float(getattr(self, name)) < math.inf:
                raise RangeError(f"{name} = {getattr(self, name)} must be positive")
        for name in ("critical_volume", "other_gases"):
            if not 0.0 <= float(getattr(self, name)) < math.inf:
                raise RangeError(f"{name} = {getattr(self, name)} must not be negative")
        if not self.surface_tension < float(self.skin_compression) < math.inf:
            raise RangeError(
                f"skin_compression = {self.skin_compression} N/m must exceed surface_tension = "
                f"{self.surface_tension} N/m"
            )
        one = self.tissues
        if one.kinetics != "exponential" or set(one.inert_gases) - {"N2", "He"}:
            raise ValidityError(
                f"{one.name}: nuclei need exponential compartments of nitrogen, or of nitrogen and helium"
            )

    @property
    def name(self) -> str:
        """Name of the model."""
        return self.tissues.name

    @property
    def radii(self) -> Array:
        """Initial critical radius of each gas of the compartments [um]."""
        own = {"N2": self.nitrogen_radius, "He": self.helium_radius}
        return np.array([own[g] for g in self.tissues.inert_gases])

    @property
    def skin(self) -> tuple[float, float]:
        """Surface tension and skin compression [N/m], as the equations take them."""
        return self.surface_tension, self.skin_compression

    def choices(self) -> dict[str, Any]:
        """Return every number and choice but the compartments.

        Returns
        -------
        dict
            Name to value.

        Examples
        --------
        >>> varying_permeability(mixing="smaller").choices()["mixing"]
        'smaller'
        """
        return {f.name: getattr(self, f.name) for f in dataclasses.fields(self) if f.name != "tissues"}

    def __repr__(self) -> str:
        return f"<VaryingPermeability {self.name}: {len(self.tissues.compartments)} compartments>"


def varying_permeability(
    model: str | VaryingPermeability = "yount_hoffman_1986",
    *,
    compartments: str | os.PathLike[str] | TissueSet | None = None,
    half_times: Sequence[float | tuple[float, float]] | None = None,
    **choices: Any,
) -> VaryingPermeability:
    """Varying-permeability model by name, with other choices or compartments where they are given.

    Parameters
    ----------
    model : str or VaryingPermeability
        A name of :func:`models`, or a model to change.
    compartments : str, path or TissueSet, optional
        A set of exponential compartments whose half-times and convention are used instead.
    half_times : sequence of float or pair, optional
        Half-times of nitrogen to use instead [min], each with that of helium or without: then it is
        nitrogen's over 2.6455, the root of the ratio of molar masses.
    **choices
        Fields of :class:`VaryingPermeability`.

    Returns
    -------
    VaryingPermeability
        For :func:`gasphys.ascent.plan`.

    Raises
    ------
    UnknownNameError
        If there is no such model, choice or set.
    RangeError
        If a number is not possible.

    Examples
    --------
    >>> varying_permeability(boyle_expansion=True, compartments="buhlmann_1995_a")
    <VaryingPermeability yount_hoffman_1986: 16 compartments>
    """
    if isinstance(model, VaryingPermeability):
        base, given = model.tissues, model.choices()
    elif model in _FILES:
        base, given = _shipped(model), {}
    else:
        raise unknown_name("bubble model", str(model), _FILES)
    fields = [f.name for f in dataclasses.fields(VaryingPermeability) if f.name != "tissues"]
    for name in choices:
        if name not in fields:
            raise unknown_name("choice of a bubble model", name, fields)
    chosen: Mapping[str, Any] = {**given, **choices}
    tested = (str(chosen.get("tested", OPTIONS["tested"][0])),)
    if compartments is not None:
        base = _with_compartments(base, load(compartments))
    if half_times is not None:
        base = _with_half_times(base, half_times)
    if choices:
        text = base.digest + repr(sorted((k, str(v)) for k, v in choices.items()))
        base = dataclasses.replace(base, digest=hashlib.sha256(text.encode()).hexdigest()[:12])
    return VaryingPermeability(dataclasses.replace(base, tested=tested), **chosen)


def bubble_model(model: Any) -> VaryingPermeability | None:
    """Return the bubble model that is meant, or None where something else is.

    Parameters
    ----------
    model : Any
        What a planner was given.

    Returns
    -------
    VaryingPermeability or None
        With its defaults where a name was given.

    Examples
    --------
    >>> bubble_model("workman_1965") is None
    True
    """
    if isinstance(model, VaryingPermeability) or (isinstance(model, str) and model in _FILES):
        return varying_permeability(model)
    return None


def _with_compartments(base: TissueSet, other: TissueSet) -> TissueSet:
    """Put the compartments and the convention of another set into a model; its own limits are gone."""
    none = np.full(other.half_time.shape, np.nan)
    return dataclasses.replace(
        base,
        references=(*base.references, *other.references),
        inert_gases=other.inert_gases,
        counted_as=other.counted_as,
        kinetics=other.kinetics,
        compartments=other.compartments,
        half_time=other.half_time,
        a=none,
        b=none,
        alveolar=other.alveolar,
        convention=other.convention,
        provenance_of={g: weakest([v, base.provenance_of.get(g, v)]) for g, v in other.provenance_of.items()},
        digest=hashlib.sha256((base.digest + other.digest).encode()).hexdigest()[:12],
        variant=f"compartments of {other.name}",
    )


def _with_half_times(base: TissueSet, half_times: Sequence[float | tuple[float, float]]) -> TissueSet:
    """Put half-times of nitrogen, or of nitrogen and helium, into a model."""
    pairs = [(h, h / _GRAHAM) if isinstance(h, (int, float)) else tuple(h) for h in half_times]
    values = np.array(pairs, dtype=float)
    if not values.size or values.shape[1:] != (2,) or not ((values > 0.0) & np.isfinite(values)).all():
        raise RangeError("half_times must be positive minutes, of nitrogen or pairs of nitrogen and helium")
    names = tuple(f"{h:g}" for h, _ in pairs)
    if len(set(names)) < len(names) or base.inert_gases != ("N2", "He"):
        raise RangeError("half_times: give each once, for a model of nitrogen and helium")
    digest = hashlib.sha256((base.digest + repr(values.tolist())).encode()).hexdigest()[:12]
    none = np.full(values.shape, np.nan)
    values.flags.writeable = False
    return dataclasses.replace(
        base, compartments=names, half_time=values, a=none, b=none, digest=digest, variant="own half-times"
    )
