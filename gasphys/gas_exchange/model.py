"""Oxygen and carbon dioxide from the breathing gas to mixed venous blood along an exposure."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import xarray as xr

from gasphys import blood, lungs
from gasphys.breathing_gas import fraction_breathed
from gasphys.constants import BODY_VAPOR_PRESSURE
from gasphys.errors import unknown_name
from gasphys.exposure import Exposure
from gasphys.gas_exchange.equations import arterial_po2_from_ratio
from gasphys.person import Person, measurable
from gasphys.policy import validity, weakest
from gasphys.quantities import CAUTION, attributes, quantity

__all__ = ["ARTERIOVENOUS_BAND", "FLAGS", "MODELS", "calibrate", "oxygenation"]

#: How arterial PO2 may follow from alveolar.
MODELS = ("ratio", "shunt")

#: Factors on the arteriovenous difference that make the band of mixed venous values: 4.5 to 6 mL/dL
#: about the 5 of a person at rest.
ARTERIOVENOUS_BAND = (0.9, 1.2)

#: What the variable ``gas_exchange_flag`` tells.
FLAGS = (
    "none",
    "negative_alveolar_po2",
    "shunt_exceeds_content",
    "difference_exceeds_content",
    "venous_ph_outside_7.0_to_7.7",
)

_FLAG_TEXT = {
    1: "a negative alveolar PO2: this gas cannot sustain life there",
    2: "no arterial PO2: shunt times arteriovenous difference exceeds the end-capillary content",
    3: "no mixed venous PO2: the arteriovenous difference exceeds the arterial content",
    4: "no mixed venous values: venous pH outside 7.0 to 7.7, where CO2 content is known",
}

#: The default of :func:`calibrate`, told from a measured 15 g/dL by being this very object.
_HEMOGLOBIN = float("15")

_COMMON = ("arterial_pco2", "respiratory_exchange_ratio")
_OF_MODEL = {"ratio": ("arterial_alveolar_ratio",), "shunt": ("shunt_fraction",)}
_OF_BLOOD = ("hemoglobin", "arteriovenous_difference", "cardiac_output", "arterial_ph", "cohb_fraction")

_CURVE = {"model": "severinghaus_1979"}

#: Quantity of a variable where it is not that of its name.
_QUANTITY = {
    "mixed_venous_o2_saturation": "venous_o2_saturation",
    "mixed_venous_pco2": "venous_pco2",
    "arterial_liganded_fraction": "liganded_fraction",
    "mixed_venous_liganded_fraction": "liganded_fraction",
    "end_capillary_ph": "ph",
    "end_capillary_co2_content": "co2_content",
}


def calibrate(
    *,
    arterial_po2: Any,
    fio2: Any,
    arterial_pco2: Any,
    hemoglobin: float = _HEMOGLOBIN,
    barometric_pressure: Any = 101.325,
) -> Person:
    """Describe a person's lungs from one bedside blood gas.

    Parameters
    ----------
    arterial_po2 : float or str
        Measured arterial PO2 [kPa].
    fio2 : float or str
        Inspired O2 fraction the sample was taken on [1].
    arterial_pco2 : float or str
        Measured arterial PCO2 [kPa].
    hemoglobin : float
        Hemoglobin [g/dL]; assumed where it is not given.
    barometric_pressure : float or str
        Barometric pressure at the bedside [kPa absolute].

    Returns
    -------
    Person
        With the measured values, ``arterial_alveolar_ratio`` and ``shunt_fraction`` (R 0.8,
        arteriovenous difference 5 mL/dL).

    Raises
    ------
    RangeError
        If a value is not possible, or the arterial PO2 exceeds the alveolar one.

    Warns
    -----
    ValidityWarning
        If the ratio is below 0.75, where it need not carry over to pressure, or the sample was
        taken on air.

    Examples
    --------
    >>> person = calibrate(arterial_po2=25.3, fio2=0.40, arterial_pco2=5.2, barometric_pressure=101.0)
    >>> round(person.arterial_alveolar_ratio, 2), round(person.shunt_fraction, 3)
    (0.79, 0.036)
    >>> person.is_measured("hemoglobin")
    False
    """
    return Person.from_sample(
        arterial_po2=arterial_po2,
        fio2=fio2,
        arterial_pco2=arterial_pco2,
        barometric_pressure=barometric_pressure,
        **({} if hemoglobin is _HEMOGLOBIN else {"hemoglobin": hemoglobin}),
    )


def oxygenation(
    exposure: Exposure,
    person: Person | None = None,
    model: str = "ratio",
    *,
    fico2: Any = None,
    at: Any = None,
) -> xr.Dataset:
    """Oxygen and CO2 of a person along an exposure, from the breathing gas to mixed venous blood.

    Parameters
    ----------
    exposure : Exposure
        Pressure and breathing gas against time.
    person : Person, optional
        What is measured; what is not is assumed and named in the Dataset. Labelled arrays broadcast over
        the scenarios of the exposure.
    model : {"ratio", "shunt", "both"}
        How arterial follows alveolar PO2: a constant ratio (healthy lungs), a constant shunt (diseased
        lungs), or both, on a dimension ``model``.
    fico2 : float or array_like, optional
        CO2 of the dry gas breathed [1], a number or one for each piece, where the gas does not tell it (a
        mask, a chamber, a worn absorbent). Else that of the gas; a loop's absorbent takes its CO2.
    at : array_like, optional
        Times to add to the exposure's own [min].

    Returns
    -------
    Dataset
        On the exposure's ``time``: ``inspired_po2``, ``inspired_pco2``, ``alveolar_po2``,
        ``end_capillary_po2``, ``arterial_po2`` and ``mixed_venous_po2`` with ``_low`` and ``_high``;
        saturations and contents; ``arterial_dissolved_o2`` and ``dissolved_o2_share``;
        ``o2_delivery_stpd`` and ``o2_extraction``; ``mixed_venous_pco2`` and
        ``venous_arterial_pco2_difference``; ``gas_exchange_flag``, which tells of each NaN why.

    Raises
    ------
    UnknownNameError
        For another model.

    Notes
    -----
    Steady state at each instant: not during the wash-in or wash-out of inert gas. Arterial PCO2 and pH
    are inputs and stay as given; pH 7.40 where it was not measured, as in the compensated. Mixed venous
    O2 and CO2 are solved together: venous pH shifts the O2 curve (Bohr), venous saturation changes CO2
    content (Haldane). ``_low`` and ``_high`` are for 0.9 and 1.2 times the arteriovenous difference
    (4.5 to 6 mL/dL about 5), arterial blood unchanged. Carbon monoxide takes hemoglobin away and shifts
    the curve of the rest to the left (:func:`gasphys.blood.o2_saturation_beside_cohb`); COHb stays as given.
    CO2 in the gas raises alveolar PO2 for the arterial PCO2 given, which it would itself raise.

    Examples
    --------
    >>> session = Exposure.start("oxygen").travel(pressure="2.4 atm", minutes=10)
    >>> ds = oxygenation(session, model="both")
    >>> float(ds.alveolar_po2[-1].round(1))
    231.6
    >>> ds.arterial_po2.isel(time=-1).values.round()
    array([190., 220.])
    """
    if model not in (*MODELS, "both"):
        raise unknown_name("gas exchange model", model, (*MODELS, "both"))
    person = Person() if person is None else person
    chosen = MODELS if model == "both" else (model,)
    used = (*_COMMON, *(n for m in chosen for n in _OF_MODEL[m]), *_OF_BLOOD)
    values = {name: person.value(name) for name in used}
    out = exposure.to_dataset(at=at)
    chain = _Chain(out)
    chain.values = {name: chain.given(name, value) for name, value in values.items()}
    out["fico2"] = _co2_breathed(out, fico2)
    with validity("ignore"):
        _to_alveolus(chain)
        _to_artery(chain, chosen, both=model == "both")
        _to_vein(chain)
        _flag(out)
    texts = _texts(out, values, chosen, both=model == "both")
    out.attrs = {
        **out.attrs,
        "title": "oxygen from breathing gas to mixed venous blood",
        "source": out.attrs["source"].replace(", exposure", f", gas exchange model {model}"),
        "references": "; ".join(dict.fromkeys(chain.references)),
        "assumed": person.told(used, measured=False),
        "measured": person.told(used, measured=True),
        "arteriovenous_band": [
            float(end(f * values["arteriovenous_difference"]))
            for f, end in zip(ARTERIOVENOUS_BAND, (np.min, np.max), strict=True)
        ],
        "provenance": weakest(chain.provenance),
        "comment": CAUTION,
    }
    if texts:
        out.attrs["flags"] = "; ".join(texts)
    return out


def recorded(person: Person, **arguments: Any) -> str:
    """Return what an integration was started with, as text it can be run again from."""
    known = {n: getattr(person, n) for n in measurable() if getattr(person, n) is not None}
    return json.dumps({"person": {**known, "assumed": person.assumed}, **arguments})


class _Chain:
    """Evaluate equations on a dataset and write down, for each variable, equation and inputs."""

    def __init__(self, ds: xr.Dataset) -> None:
        self.ds = ds
        self.references: list[str] = []
        self.provenance: list[str] = []
        #: What is known of the person, each a number or the name of a variable, ``"@x"``.
        self.values: dict[str, Any] = {}

    def read(self, inputs: dict[str, Any]) -> dict[str, Any]:
        """Return inputs with the variable x of the dataset in the place of ``"@x"``."""
        return {k: self.ds[v[1:]] if _is_name(v) else v for k, v in inputs.items()}

    def given(self, name: str, value: Any, end: str = "") -> Any:
        """Return a value to be used as an input: a labelled array becomes a variable of the dataset."""
        if not isinstance(value, xr.DataArray):
            return value
        self.ds[name + end] = value
        self.ds[name + end].attrs = attributes(name)
        return f"@{name}{end}"

    def put(self, name: str, equation: str, f: Any, **inputs: Any) -> None:
        """Add a variable; an input ``"@x"`` is the variable x of the dataset."""
        result = f(**self.read(inputs))
        if not isinstance(result, xr.DataArray):
            # From numbers alone: one value for the whole exposure.
            result = xr.DataArray(result)
            result.attrs = {"references": "; ".join(f.sources), "provenance": f.provenance}
        self.keep(name, result, equation, inputs)

    def keep(self, name: str, result: xr.DataArray, equation: str, inputs: dict[str, Any]) -> None:
        """Store a result under its own attributes."""
        known = {k: v for k, v in result.attrs.items() if k in ("references", "provenance")}
        self.references += known["references"].split("; ")
        self.provenance.append(known["provenance"])
        base, _, end = name.rpartition("_")
        base = base if end in ("low", "high") else name
        attrs = attributes(_QUANTITY.get(base, base))
        if base != name:
            attrs["long_name"] += f", {end} end of the band"
        along = self.ds["ambient_pressure"].dims[-1]
        self.ds[name] = result.transpose(..., along) if along in result.dims else result
        self.ds[name].attrs = {**attrs, **known, "equation": equation, "inputs": json.dumps(inputs)}

    # Blood with carbon monoxide has equations of its own; without it the plain ones are told.

    @property
    def carries_co(self) -> bool:
        """Whether any of the blood carries carbon monoxide."""
        return bool(np.any(self.read(self.values)["cohb_fraction"] > 0.0))

    def content(self, name: str, *, po2: str, ph: Any) -> None:
        """Add the O2 content at a PO2."""
        if self.carries_co:
            blood_of = {k: self.values[k] for k in ("hemoglobin", "cohb_fraction")}
            self.put(
                name, "blood.o2_content_beside_cohb", blood.o2_content_beside_cohb, po2=po2, **blood_of, ph=ph
            )
        else:
            self.put(
                name,
                "blood.o2_content",
                blood.o2_content,
                po2=po2,
                hemoglobin="@functional_hemoglobin",
                **_CURVE,
                ph=ph,
            )

    def saturation(self, name: str, *, po2: str, ph: Any) -> None:
        """Add the saturation of what hemoglobin is left for O2."""
        if self.carries_co:
            f = blood.o2_saturation_beside_cohb
            cohb = self.values["cohb_fraction"]
            self.put(name, "blood.o2_saturation_beside_cohb", f, po2=po2, cohb_fraction=cohb, ph=ph)
        else:
            self.put(name, "blood.o2_saturation", blood.o2_saturation, po2=po2, **_CURVE, ph=ph)

    def po2(self, name: str, *, content: str, ph: Any) -> None:
        """Add the PO2 at an O2 content."""
        if self.carries_co:
            f = blood.po2_at_content_beside_cohb
            blood_of = {k: self.values[k] for k in ("hemoglobin", "cohb_fraction")}
            self.put(name, "blood.po2_at_content_beside_cohb", f, content=content, **blood_of, ph=ph)
        else:
            self.put(
                name,
                "blood.po2_at_content",
                blood.po2_at_content,
                content=content,
                hemoglobin="@functional_hemoglobin",
                **_CURVE,
                ph=ph,
            )

    def liganded(self, site: str) -> str:
        """Return the variable with the share of hemoglobin that carries O2 or CO."""
        saturation = f"@{site}_o2_saturation"
        if not self.carries_co:
            return saturation
        name = f"{site}_liganded_fraction"
        self.put(
            name,
            "blood.liganded_fraction",
            blood.liganded_fraction,
            o2_saturation=saturation,
            cohb_fraction=self.values["cohb_fraction"],
        )
        return f"@{name}"


def _is_name(value: Any) -> bool:
    return isinstance(value, str) and value.startswith("@")


def _co2_breathed(ds: xr.Dataset, fico2: Any) -> xr.DataArray:
    """Return the CO2 fraction of the dry gas at each time: as given, or that of the gas."""
    if fico2 is not None:
        one = quantity("fico2")
        given = np.asarray(one.from_text(fico2) if isinstance(fico2, str) else fico2, dtype=float)
        low, high = one.possible
        if not np.all((given >= low) & (given <= high)):
            raise one.range_error(float(np.ravel(given[~((given >= low) & (given <= high))])[0]))
        of_piece = xr.DataArray(np.broadcast_to(given, (ds.sizes["segment"],)).copy(), dims="segment")
    elif "CO2" in ds["gas"].values:
        of_piece = ds["gas_fraction"].sel(gas="CO2", drop=True).where(ds["setpoint"].isnull(), 0.0)
    else:
        of_piece = xr.DataArray(np.zeros(ds.sizes["segment"]), dims="segment")
    found = of_piece.isel(segment=ds["segment_of_time"]).drop_vars("segment", errors="ignore")
    found.attrs = attributes("fico2")
    return found


def _to_alveolus(chain: _Chain) -> None:
    values = chain.values
    vapor = float(BODY_VAPOR_PRESSURE)
    pressure = {"ambient_pressure": "@ambient_pressure"}
    # The fraction of what is breathed, on a loop too: dry PO2 over ambient pressure.
    chain.put(
        "fio2",
        "breathing_gas.fraction_breathed",
        fraction_breathed,
        breathing_gas_po2="@breathing_gas_po2",
        **pressure,
    )
    chain.put(
        "inspired_po2",
        "lungs.inspired_po2",
        lungs.inspired_po2,
        **pressure,
        fio2="@fio2",
        water_vapor_pressure=vapor,
    )
    chain.put(
        "inspired_pco2",
        "lungs.inspired_pco2",
        lungs.inspired_pco2,
        **pressure,
        fico2="@fico2",
        water_vapor_pressure=vapor,
    )
    alveolar = {
        **pressure,
        "fio2": "@fio2",
        "alveolar_pco2": values["arterial_pco2"],
        "respiratory_exchange_ratio": values["respiratory_exchange_ratio"],
        "fico2": "@fico2",
        "water_vapor_pressure": vapor,
    }
    for name in ("alveolar_po2", "end_capillary_po2"):  # the ideal alveolus: in equilibrium
        chain.put(name, "lungs.alveolar_po2", lungs.alveolar_po2, **alveolar)


def _to_artery(chain: _Chain, chosen: tuple[str, ...], both: bool) -> None:
    values = chain.values
    chain.put(
        "functional_hemoglobin",
        "blood.functional_hemoglobin",
        blood.functional_hemoglobin,
        hemoglobin=values["hemoglobin"],
        cohb_fraction=values["cohb_fraction"],
    )
    ph = values["arterial_ph"]
    chain.content("end_capillary_o2_content", po2="@end_capillary_po2", ph=ph)
    inputs: dict[str, dict[str, Any]] = {
        "ratio": {"ratio": values.get("arterial_alveolar_ratio")},
        "shunt": {
            "shunt_fraction": values.get("shunt_fraction"),
            "hemoglobin": values["hemoglobin"],
            "arteriovenous_difference": values["arteriovenous_difference"],
            "ph": ph,
            "cohb_fraction": values["cohb_fraction"],
        },
    }
    equations = {
        "ratio": ("gas_exchange.arterial_po2_from_ratio", arterial_po2_from_ratio),
        "shunt": ("blood.arterial_po2_from_shunt", blood.arterial_po2_from_shunt),
    }
    found = [equations[m][1](alveolar_po2=chain.ds["alveolar_po2"], **chain.read(inputs[m])) for m in chosen]
    arterial = found[0]
    if both:
        arterial = xr.concat(found, dim=xr.DataArray(list(chosen), dims="model", name="model"))
        arterial.attrs = {
            "references": "; ".join(dict.fromkeys(f.attrs["references"] for f in found)),
            "provenance": weakest([f.attrs["provenance"] for f in found]),
        }
    chain.keep(
        "arterial_po2",
        arterial,
        " | ".join(equations[m][0] for m in chosen),
        {"alveolar_po2": "@alveolar_po2", **{k: v for m in chosen for k, v in inputs[m].items()}},
    )
    chain.saturation("arterial_o2_saturation", po2="@arterial_po2", ph=ph)
    chain.put("arterial_dissolved_o2", "blood.dissolved_o2", blood.dissolved_o2, po2="@arterial_po2")
    chain.content("arterial_o2_content", po2="@arterial_po2", ph=ph)
    content = {"arterial_o2_content": "@arterial_o2_content"}
    chain.put(
        "dissolved_o2_share",
        "blood.dissolved_o2_share",
        blood.dissolved_o2_share,
        po2="@arterial_po2",
        o2_content="@arterial_o2_content",
    )
    chain.put(
        "o2_delivery_stpd",
        "blood.o2_delivery",
        blood.o2_delivery,
        cardiac_output=values["cardiac_output"],
        **content,
    )
    chain.put(
        "o2_extraction",
        "blood.o2_extraction",
        blood.o2_extraction,
        arteriovenous_difference=values["arteriovenous_difference"],
        **content,
    )


def _to_vein(chain: _Chain) -> None:
    values = chain.values
    hemoglobin = values["hemoglobin"]
    arterial = {
        "pco2": values["arterial_pco2"],
        "ph": values["arterial_ph"],
        "hemoglobin": hemoglobin,
        "o2_saturation": chain.liganded("arterial"),
    }
    chain.put("base_excess", "blood.base_excess", blood.base_excess, **arterial)
    chain.put(
        "arterial_co2_content",
        "blood.co2_content",
        blood.co2_content,
        **arterial,
        model="douglas_1988",
    )
    difference, exchange = (
        chain.read(values)[name] for name in ("arteriovenous_difference", "respiratory_exchange_ratio")
    )
    for end, factor in (
        ("", 1.0),
        ("_high", ARTERIOVENOUS_BAND[0]),
        ("_low", ARTERIOVENOUS_BAND[1]),
    ):
        taken = chain.given("arteriovenous_difference", difference * factor, end)
        chain.put(
            f"mixed_venous_o2_content{end}",
            "blood.mixed_venous_o2_content",
            blood.mixed_venous_o2_content,
            arterial_o2_content="@arterial_o2_content",
            arteriovenous_difference=taken,
        )
        load = blood.co2_load(exchange, difference * factor)
        # The flow that gives less O2 off takes less CO2 up: high O2 goes with low CO2.
        other = {"": "", "_high": "_low", "_low": "_high"}[end]
        chain.put(
            f"mixed_venous_co2_content{other}",
            "blood.mixed_venous_co2_content",
            blood.mixed_venous_co2_content,
            arterial_co2_content="@arterial_co2_content",
            venous_arterial_co2_difference=chain.given("venous_arterial_co2_difference", load, other),
        )
        chain.put(
            f"mixed_venous_ph{end}",
            "blood.mixed_venous_ph",
            blood.mixed_venous_ph,
            mixed_venous_co2_content=f"@mixed_venous_co2_content{other}",
            base_excess="@base_excess",
            hemoglobin=hemoglobin,
            mixed_venous_o2_content=f"@mixed_venous_o2_content{end}",
            cohb_fraction=values["cohb_fraction"],
        )
        chain.po2(
            f"mixed_venous_po2{end}",
            content=f"@mixed_venous_o2_content{end}",
            ph=f"@mixed_venous_ph{end}",
        )
    chain.saturation("mixed_venous_o2_saturation", po2="@mixed_venous_po2", ph="@mixed_venous_ph")
    chain.put(
        "mixed_venous_pco2",
        "blood.pco2_at_base_excess",
        blood.pco2_at_base_excess,
        base_excess="@base_excess",
        ph="@mixed_venous_ph",
        hemoglobin=hemoglobin,
        o2_saturation=chain.liganded("mixed_venous"),
    )
    chain.put(
        "venous_arterial_pco2_difference",
        "blood.venous_arterial_pco2_difference",
        blood.venous_arterial_pco2_difference,
        venous_pco2="@mixed_venous_pco2",
        arterial_pco2=values["arterial_pco2"],
    )


def _flag(ds: xr.Dataset) -> None:
    """Say of each NaN why: the first of the reasons along the chain."""
    venous = ds["mixed_venous_o2_content_low"]
    reasons = [
        ds["alveolar_po2"] < 0.0,
        ds["arterial_po2"].isnull(),
        ~(venous >= 0.0),
        ds["mixed_venous_ph"].isnull() | ds["mixed_venous_ph_low"].isnull(),
    ]
    flag = xr.zeros_like(ds["arterial_po2"], dtype=np.int8)
    for code, reason in reversed(list(enumerate(reasons, start=1))):
        flag = flag.where(~reason, np.int8(code)).astype(np.int8)
    ds["gas_exchange_flag"] = flag.transpose(..., ds["ambient_pressure"].dims[-1])
    ds["gas_exchange_flag"].attrs = {
        "long_name": "why values are missing",
        "flag_values": list(range(len(FLAGS))),
        "flag_meanings": " ".join(FLAGS),
    }


def _texts(ds: xr.Dataset, values: dict[str, Any], chosen: tuple[str, ...], both: bool) -> list[str]:
    flag = ds["gas_exchange_flag"]
    if flag.chunks is not None:
        return ["values not computed yet: gas_exchange_flag tells of each that is missing why"]
    texts = []
    for code, text in _FLAG_TEXT.items():
        hit = flag == code
        if bool(hit.any()):
            where = ""
            if both:
                names = [m for m in chosen if bool(hit.sel(model=m).any())]
                hit = hit.any("model")
                where = "" if len(names) == 2 else f" (model {names[0]})"
            texts.append(f"{int(hit.sum())} instants with {text}{where}")
    ratio = values.get("arterial_alveolar_ratio")
    if ratio is not None and np.any(ratio < 0.75):
        low = float(np.min(ratio))
        text = f"arterial/alveolar ratio {low:.2f} is below 0.75, where it did not carry over to pressure"
        text += "; the models part" if both else "; see the shunt model"
        texts.append(text)
    cohb = float(np.max(values["cohb_fraction"]))
    if cohb > 0.0:
        texts.append(
            f"carboxyhemoglobin stays {cohb:.2f} here; on oxygen it falls (gas_exchange.carboxyhemoglobin)"
        )
    if bool((ds["inspired_pco2"] >= np.min(values["arterial_pco2"])).any()):
        texts.append("inspired PCO2 reaches the arterial PCO2 given: no steady state, arterial PCO2 rises")
    shunt = values.get("shunt_fraction")
    low, high = quantity("shunt_fraction").usual
    if shunt is not None and not np.all((low <= shunt) & (shunt <= high)):
        texts.append(f"shunt {float(np.max(shunt)):.2f} is beyond the {high:g} that the model is used for")
    return texts
