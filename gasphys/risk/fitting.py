"""Maximum likelihood: a hazard model fitted to outcomes, with intervals, tests and goodness of fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from gasphys.errors import GasphysError, NotReachableError, RangeError, unknown_name
from gasphys.exposure import Exposure
from gasphys.quantities import attributes, dataset_attributes
from gasphys.risk.equations import risk_probability
from gasphys.risk.kernel import accumulate
from gasphys.risk.model import HazardModel, probability, stacked
from gasphys.risk.outcomes import Outcome

__all__ = [
    "Fit",
    "fit",
    "goodness_of_fit",
    "likelihood_ratio_test",
    "log_likelihood",
    "null_log_likelihood",
    "simulate",
]

Array = NDArray[Any]

#: An imaginary part too small to change a real one, and so an exact derivative.
_TINY = 1e-30

#: Standard error of a logarithm beyond which a number is not determined at all.
_LOOSE = 10.0

#: What a parameter is, where it is not a pressure.
_QUANTITIES = {"gain": "hazard_gain", "half_time": "half_time"}

#: Marginal events as a share of an event [from memory: weight of the large navy fits].
MARGINAL_WEIGHT = 0.1

_NOTE = (
    "Own outcomes, own model: no fitted set for people ships with gasphys. A fit holds for exposures like "
    "those fitted; onset times carry the bias of how closely people were watched."
)


class _Likelihood:
    """ln L of outcomes by a model, and its exact gradient by the parameters."""

    def __init__(
        self,
        outcomes: Sequence[Outcome],
        model: HazardModel,
        serious: HazardModel | None,
        marginal_weight: float,
        use_times: bool,
        follow_up: float,
    ) -> None:
        if not outcomes:
            raise RangeError("there is no outcome to fit")
        self.outcomes, self.model, self.serious = tuple(outcomes), model, serious
        self.share = np.array([o.share(marginal_weight) for o in outcomes])
        self.count = np.array([o.count for o in outcomes])
        self.timed = np.array([use_times and o.last_well is not None for o in outcomes])
        if serious is not None:
            bad = [o.outcome for o in outcomes if o.outcome not in ("none", "mild", "serious")]
            if bad:
                raise RangeError(f"three outcomes are none, mild and serious; {bad[0]!r} is none of them")
        self.is_serious = np.array([o.outcome == "serious" for o in outcomes])
        cuts = [
            (o.last_well or 0.0, o.first_symptom or 0.0) if timed else (0.0, 0.0)
            for o, timed in zip(outcomes, self.timed, strict=True)
        ]
        exposures = [o.exposure for o in outcomes]
        self.profile, self.places = stacked(exposures, cuts, model.water_vapor_pressure, follow_up)
        self.evaluations = 0

    def hazards(
        self, values: Mapping[str, complex], which: HazardModel, prefix: str = ""
    ) -> tuple[Array, ...]:
        """Return R(0, T1), R(T1, T2) and R in all of each outcome."""
        own = {k.removeprefix(prefix): v for k, v in values.items() if k.startswith(prefix)}
        own = {k: v for k, v in own.items() if k in which.parameters()}
        total, _ = accumulate(self.profile, which.arrays(own))
        summed = total.sum(axis=1)
        rows = np.arange(len(self.outcomes))
        first, second = (summed[rows, self.places[:, k]] for k in (0, 1))
        return first, second - first, summed[:, -1]

    def each(self, values: Mapping[str, complex]) -> Array:
        """Return ln L of every outcome, complex where a value is."""
        first, within, whole = self.hazards(values, self.model)
        before = np.where(self.timed, first, 0.0)
        inside = np.where(self.timed, within, whole)
        with np.errstate(divide="ignore", invalid="ignore"):
            event = -before + np.log(-np.expm1(-inside))
            none = -whole
            if self.serious is not None:
                first, within, all_serious = self.hazards(values, self.serious, "serious.")
                before = np.where(self.timed, first, 0.0)
                inside = np.where(self.timed, within, all_serious)
                grave = -before + np.log(-np.expm1(-inside))
                none = none - all_serious
                event = np.where(self.is_serious, grave, event - all_serious)
            result = np.where(self.share > 0.0, self.share * event, 0.0)
            result = result + np.where(self.share < 1.0, (1.0 - self.share) * none, 0.0)
        return np.asarray(self.count * result)

    def value(self, values: Mapping[str, float]) -> float:
        """Return ln L."""
        self.evaluations += 1
        return float(self.each(values).sum())

    def gradient(self, values: Mapping[str, float], names: Sequence[str]) -> Array:
        """Return d ln L/d parameter for some of the values, one complex evaluation each."""
        slopes = []
        for name in names:
            self.evaluations += 1
            moved = {**values, name: values[name] + 1j * _TINY}
            slopes.append(self.each(moved).imag.sum() / _TINY)
        return np.array(slopes)


def log_likelihood(
    outcomes: Sequence[Outcome],
    model: HazardModel,
    *,
    serious: HazardModel | None = None,
    marginal_weight: float = MARGINAL_WEIGHT,
    use_times: bool = True,
    follow_up: float = 1440.0,
) -> float:
    """Log-likelihood of outcomes by a model as it is.

    Parameters
    ----------
    outcomes : sequence of Outcome
        What happened.
    model : HazardModel
        Of sickness; of mild sickness where `serious` is given.
    serious : HazardModel, optional
        Of serious sickness: three outcomes, serious first.
    marginal_weight : float, default 0.1
        Share of an event that a marginal one counts as.
    use_times : bool, default True
        Use times of onset where they are known.
    follow_up : float, default 1440
        Time on air at the last pressure after each exposure [min].

    Returns
    -------
    float
        Without the binomial factors of counts, which no parameter changes.

    Raises
    ------
    RangeError
        If there is no outcome, or one does not fit the three of `serious`.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> from gasphys.risk import Compartment
    >>> dive = Exposure.start("air").travel(depth=18, rate=18).stay(60).travel(depth=0, rate=9)
    >>> model = HazardModel([Compartment(240.0, 1e-3)])
    >>> log_likelihood([Outcome(dive, "none")], model) < 0.0
    True
    """
    return _Likelihood(outcomes, model, serious, marginal_weight, use_times, follow_up).value({})


def null_log_likelihood(outcomes: Sequence[Outcome], marginal_weight: float = MARGINAL_WEIGHT) -> float:
    """Log-likelihood of one probability for all exposures: what a model has to beat.

    Parameters
    ----------
    outcomes : sequence of Outcome
        What happened.
    marginal_weight : float, default 0.1
        Share of an event that a marginal one counts as.

    Returns
    -------
    float
        k ln(k/n) + (n - k) ln(1 - k/n), k the sum of event shares; times are not used.

    Raises
    ------
    RangeError
        If there is no outcome.

    Examples
    --------
    190 events in 3322:

    >>> from gasphys import Exposure
    >>> x = Exposure.start("air").stay(5)
    >>> round(null_log_likelihood([Outcome(x, "event", count=190), Outcome(x, "none", count=3132)]), 4)
    -728.1065
    """
    if not outcomes:
        raise RangeError("there is no outcome")
    count = np.array([o.count for o in outcomes])
    events = float(np.sum(count * [o.share(marginal_weight) for o in outcomes]))
    whole = float(count.sum())
    parts = [(events, events / whole), (whole - events, 1.0 - events / whole)]
    return float(sum(n * np.log(p) for n, p in parts if n > 0.0))


def simulate(
    exposures: Exposure | Sequence[Exposure],
    model: HazardModel,
    rng: np.random.Generator,
    count: int = 1,
    follow_up: float = 1440.0,
) -> tuple[Outcome, ...]:
    """Draw outcomes that a model would give: to see whether a fit finds the model again.

    Parameters
    ----------
    exposures : Exposure or sequence of Exposure
        Each scenario of each is an exposure of its own.
    model : HazardModel
        The truth.
    rng : Generator
        Of random numbers.
    count : int, default 1
        Persons in each exposure.
    follow_up : float, default 1440
        Time on air at the last pressure after each exposure [min].

    Returns
    -------
    tuple of Outcome
        Events and exposures without one, counted; times of onset are not drawn.

    Raises
    ------
    RangeError
        If `count` is below 1.

    Examples
    --------
    >>> from gasphys.risk import Compartment
    >>> dive = Exposure.start("air").travel(depth=30, minutes=2).stay(60).travel(depth=0, minutes=3)
    >>> seen = simulate([dive], HazardModel([Compartment(240.0, 1e-2)]), np.random.default_rng(3), 100)
    >>> sum(one.count for one in seen)
    100.0
    """
    if count < 1:
        raise RangeError(f"count = {count} persons is not at least 1")
    several = [exposures] if isinstance(exposures, Exposure) else exposures
    each = [one for exposure in several for one in exposure.scenarios()]
    profile, _ = stacked(each, [()] * len(each), model.water_vapor_pressure, follow_up)
    total = accumulate(profile, model.arrays())[0].sum(axis=1)[:, -1]
    events = rng.binomial(count, risk_probability.raw(total))
    found = []
    for exposure, ill in zip(each, events.tolist(), strict=True):
        found += [
            Outcome(exposure, outcome, count=float(n))
            for outcome, n in (("event", ill), ("none", count - ill))
            if n
        ]
    return tuple(found)


@dataclass(frozen=True, eq=False)
class Fit:
    """A fitted model.

    Parameters
    ----------
    model : HazardModel
        With the estimates.
    result : Dataset
        ``estimate``, ``standard_error``, ``delta_low``, ``delta_high`` by ``parameter``, ``covariance`` by
        ``parameter`` and ``parameter_2``.
    serious : HazardModel or None
        Of serious sickness, with its estimates.
    """

    model: HazardModel
    result: xr.Dataset
    serious: HazardModel | None
    _likelihood: _Likelihood = field(repr=False)
    _logs: Array = field(repr=False)

    @property
    def log_likelihood(self) -> float:
        """ln L at the estimates."""
        return float(self.result.attrs["log_likelihood"])

    @property
    def names(self) -> list[str]:
        """Names of the fitted parameters."""
        return [str(n) for n in self.result["parameter"].values]

    def draws(self, n: int, rng: np.random.Generator) -> list[HazardModel]:
        """Return models drawn from the normal approximation of the fit: bands of what follows from it.

        Parameters
        ----------
        n : int
            How many.
        rng : Generator
            Of random numbers.

        Returns
        -------
        list of HazardModel
            On the scale of the fit: logarithms of gains and half-times stay normal, so none is negative.

        Examples
        --------
        >>> from gasphys import Exposure
        >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
        >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
        >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
        >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
        >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
        >>> fitted = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
        >>> len(fitted.draws(3, np.random.default_rng(1)))
        3
        """
        covariance = _scaled_covariance(self)
        center = _to_scale(self.result["estimate"].values, self._logs)
        found = rng.multivariate_normal(center, covariance, size=n, method="eigh")
        return [
            self.model.with_parameters(
                {
                    k: v
                    for k, v in zip(self.names, _from_scale(row, self._logs), strict=True)
                    if not k.startswith("serious.")
                }
            )
            for row in found
        ]

    def band(
        self, exposure: Exposure, rng: np.random.Generator, n: int = 400, level: float = 0.95
    ) -> xr.Dataset:
        """Probability of an exposure by the fit, and how sure the fit is of it.

        Parameters
        ----------
        exposure : Exposure
            Without scenarios.
        rng : Generator
            Of random numbers.
        n : int, default 400
            Models drawn from the covariance of the fit.
        level : float, default 0.95
            Share of the draws inside the band.

        Returns
        -------
        Dataset
            ``risk_probability`` by the estimates, ``low`` and ``high``.

        Notes
        -----
        The uncertainty of the fitted numbers only: not of the model, nor of one person.

        Examples
        --------
        >>> from gasphys import Exposure
        >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
        >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
        >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
        >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
        >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
        >>> fitted = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
        >>> one = fitted.band(dives[0], np.random.default_rng(1), n=50)
        >>> bool(one.low < one.risk_probability < one.high)
        True
        """
        follow_up = float(self.result.attrs["follow_up"])

        def final(model: HazardModel) -> float:
            return float(probability(exposure, model, follow_up).final_probability)

        drawn = [final(model) for model in self.draws(n, rng)]
        ends = np.quantile(drawn, [0.5 - 0.5 * level, 0.5 + 0.5 * level])
        ds = xr.Dataset()
        for name, value in (("risk_probability", final(self.model)), ("low", ends[0]), ("high", ends[1])):
            ds[name] = ((), value, attributes("risk_probability"))
        ds.attrs = dataset_attributes(
            "probability of decompression sickness by a fit, with its band",
            f"risk, {self.model.name}",
            references=["weathersby_1984"],
            comment=_NOTE,
            level=level,
            draws=n,
            provenance="memory_high",
        )
        return ds

    def profile_interval(self, name: str, level: float = 0.95) -> tuple[float, float]:
        """Interval in which the likelihood ratio does not reject, the others fitted again at each value.

        Parameters
        ----------
        name : str
            A fitted parameter.
        level : float, default 0.95
            Confidence.

        Returns
        -------
        low, high : float
            An end is the parameter's own bound where the likelihood does not fall far enough.

        Raises
        ------
        UnknownNameError
            If `name` was not fitted.

        Notes
        -----
        2 (ln L(max) - ln L(value)) = the chi-square quantile with one degree of freedom.

        Examples
        --------
        >>> from gasphys import Exposure
        >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
        >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
        >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
        >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
        >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
        >>> fitted = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
        >>> low, high = fitted.profile_interval("gain_1")
        >>> low < fitted.result.estimate.item() < high
        True
        """
        from scipy.optimize import brentq
        from scipy.stats import chi2

        if name not in self.names:
            raise unknown_name("fitted parameter", name, self.names)
        place = self.names.index(name)
        drop = 0.5 * float(chi2.ppf(level, 1))
        values = self.result["estimate"].values.copy()
        scaled = _to_scale(values, self._logs)
        error = float(np.sqrt(_scaled_covariance(self)[place, place]))
        others = [n for n in self.names if n != name]

        def fall(at: float) -> float:
            fixed = _from_scale(np.array([at]), self._logs[[place]])[0]
            if not others:
                best = self._likelihood.value({name: fixed})
            else:
                begin = np.delete(scaled, place)
                best = -_minimize(
                    self._likelihood, others, begin, np.delete(self._logs, place), {name: fixed}
                )[1]
            return self.log_likelihood - best - drop

        ends = []
        for side in (-1.0, 1.0):
            step, far = side * 1.96 * error, scaled[place]
            for _ in range(12):
                far = far + step
                if fall(far) > 0.0:
                    ends.append(float(brentq(fall, far - step, far, xtol=1e-6 * error)))
                    break
            else:
                ends.append(-np.inf if side < 0.0 else np.inf)
        low, high = _from_scale(np.array(ends), self._logs[[place, place]])
        return float(low), float(high)


def fit(
    outcomes: Sequence[Outcome],
    model: HazardModel,
    parameters: Sequence[str] | None = None,
    *,
    serious: HazardModel | None = None,
    marginal_weight: float = MARGINAL_WEIGHT,
    use_times: bool = True,
    follow_up: float = 1440.0,
    level: float = 0.95,
) -> Fit:
    """Fit parameters of a hazard model to outcomes by maximum likelihood.

    Parameters
    ----------
    outcomes : sequence of Outcome
        What happened, see :func:`read_outcomes`.
    model : HazardModel
        Its numbers are the starting values, and stay where they are not fitted.
    parameters : sequence of str, optional
        Names of ``model.parameters()``, and of the serious model's after ``serious.``; all gains by default.
    serious : HazardModel, optional
        Of serious sickness: three outcomes, serious first; `model` is then of mild sickness.
    marginal_weight : float, default 0.1
        Share of an event that a marginal one counts as [from memory].
    use_times : bool, default True
        Use times of onset where they are known.
    follow_up : float, default 1440
        Time on air at the last pressure after each exposure [min].
    level : float, default 0.95
        Of the delta intervals.

    Returns
    -------
    Fit
        Estimates, covariance, intervals; ``.profile_interval(name)``, ``.draws(n, rng)``.

    Raises
    ------
    NotReachableError
        If the likelihood has no maximum to be found, or is flat there.
    UnknownNameError
        If a parameter is none of the model's.

    Notes
    -----
    Gains and half-times are fitted as logarithms. The gradient is exact (complex step); the covariance is the
    inverse of the observed information, from differences of that gradient.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
    >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
    >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
    >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
    >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
    >>> fitted = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
    >>> fitted.names
    ['gain_1']
    """
    known = dict(model.parameters())
    if serious is not None:
        known |= {f"serious.{k}": v for k, v in serious.parameters().items()}
    names = list(parameters) if parameters is not None else [k for k in known if "gain" in k]
    for name in names:
        if name not in known:
            raise unknown_name("parameter", name, known)
    likelihood = _Likelihood(outcomes, model, serious, marginal_weight, use_times, follow_up)
    logs = np.array(["gain" in n or "half_time" in n for n in names])
    start = np.array([known[n] for n in names], dtype=float)
    if np.any(start[logs] <= 0.0):
        raise RangeError("gains and half-times begin above zero")
    scaled, lowest = _minimize(likelihood, names, _to_scale(start, logs), logs, {})
    information = _information(likelihood, names, scaled, logs)
    try:
        np.linalg.cholesky(information)
    except np.linalg.LinAlgError:
        raise NotReachableError(
            f"the likelihood is flat or has no maximum in {', '.join(names)}: the outcomes do not tell them "
            "apart; fit fewer parameters"
        ) from None
    inner = np.linalg.inv(information)
    loose = [n for n, e, log in zip(names, np.sqrt(np.diag(inner)), logs, strict=True) if log and e > _LOOSE]
    if loose:
        raise NotReachableError(
            f"{', '.join(loose)} runs to zero or without end: the likelihood has no maximum there; leave "
            "that compartment out, or hold the number"
        )
    values = _from_scale(scaled, logs)
    slope = np.where(logs, values, 1.0)
    covariance = inner * np.outer(slope, slope)
    from scipy.stats import norm

    half = float(norm.ppf(0.5 + 0.5 * level)) * np.sqrt(np.diag(inner))
    low, high = _from_scale(scaled - half, logs), _from_scale(scaled + half, logs)
    ds = xr.Dataset(
        coords={"parameter": np.array(names, dtype=str), "parameter_2": np.array(names, dtype=str)}
    )
    units = [
        attributes({"gain": "hazard_gain", "half_time": "half_time"}.get(_kind(n), "hazard_threshold"))[
            "units"
        ]
        for n in names
    ]
    ds["unit"] = ("parameter", np.array(units, dtype=str), {"long_name": "unit of the parameter"})
    for name, column, meaning in (
        ("start", start, "starting value"),
        ("estimate", values, "value of greatest likelihood"),
        ("standard_error", np.sqrt(np.diag(covariance)), "standard error by the observed information"),
        ("delta_low", low, f"lower end of the {level:.0%} interval, normal on the scale of the fit"),
        ("delta_high", high, f"upper end of the {level:.0%} interval, normal on the scale of the fit"),
    ):
        ds[name] = ("parameter", column, {"long_name": meaning})
    ds["covariance"] = (
        ("parameter", "parameter_2"),
        covariance,
        {"long_name": "covariance of the estimates"},
    )
    count = np.array([o.count for o in outcomes])
    ds.attrs = dataset_attributes(
        "hazard model fitted to outcomes",
        f"risk, {model.name}",
        references=["weathersby_1984", "weathersby_1992"],
        comment=_NOTE,
        log_likelihood=-lowest,
        null_log_likelihood=null_log_likelihood(outcomes, marginal_weight),
        exposures=float(count.sum()),
        events=float(np.sum(count * likelihood.share)),
        evaluations=likelihood.evaluations,
        marginal_weight=marginal_weight,
        use_times=int(use_times),
        follow_up=follow_up,
        provenance="memory_high",
    )
    own = {k: v for k, v in zip(names, values, strict=True) if not k.startswith("serious.")}
    grave = {
        k.removeprefix("serious."): v for k, v in zip(names, values, strict=True) if k.startswith("serious.")
    }
    return Fit(
        model.with_parameters(own),
        ds,
        None if serious is None else serious.with_parameters(grave),
        likelihood,
        logs,
    )


def _kind(name: str) -> str:
    return name.removeprefix("serious.").rpartition("_")[0]


def _to_scale(values: Array, logs: Array) -> Array:
    return np.where(logs, np.log(np.where(logs, values, 1.0)), values)


def _from_scale(scaled: Array, logs: Array) -> Array:
    with np.errstate(over="ignore"):  # a search may step too far; the likelihood there is not finite
        return np.where(logs, np.exp(np.where(logs, scaled, 0.0)), scaled)


def _scaled_covariance(fitted: Fit) -> Array:
    values = fitted.result["estimate"].values
    slope = np.where(fitted._logs, values, 1.0)
    return np.asarray(fitted.result["covariance"].values / np.outer(slope, slope))


def _objective(
    likelihood: _Likelihood, names: Sequence[str], logs: Array, fixed: Mapping[str, float]
) -> Callable[[Array], tuple[float, Array]]:
    def at(scaled: Array) -> tuple[float, Array]:
        values = _from_scale(scaled, logs)
        given = {**fixed, **dict(zip(names, values.tolist(), strict=True))}
        with np.errstate(all="ignore"):
            value = likelihood.value(given)
        if not np.isfinite(value):
            return 1e300, np.zeros_like(scaled)
        return -value, -likelihood.gradient(given, names) * np.where(logs, values, 1.0)

    return at


def _minimize(
    likelihood: _Likelihood, names: Sequence[str], start: Array, logs: Array, fixed: Mapping[str, float]
) -> tuple[Array, float]:
    from scipy.optimize import minimize

    objective = _objective(likelihood, names, logs, fixed)
    found = minimize(objective, start, jac=True, method="BFGS", options={"gtol": 1e-6, "maxiter": 500})
    scale = max(1.0, abs(float(found.fun)))
    if not np.isfinite(found.fun) or found.fun >= 1e299 or np.max(np.abs(found.jac)) > 1e-3 * scale:
        raise NotReachableError(
            f"the likelihood has no maximum to be found from these starting values: {found.message}"
        )
    return np.asarray(found.x), float(found.fun)


def _information(likelihood: _Likelihood, names: Sequence[str], scaled: Array, logs: Array) -> Array:
    """Return minus the second derivatives of ln L on the scale of the fit."""
    objective = _objective(likelihood, names, logs, {})
    n = len(names)
    matrix = np.zeros((n, n))
    for i in range(n):
        step = 1e-4 * max(1.0, abs(scaled[i]))
        shift = np.zeros(n)
        shift[i] = step
        matrix[i] = (objective(scaled + shift)[1] - objective(scaled - shift)[1]) / (2.0 * step)
    return 0.5 * (matrix + matrix.T)


def likelihood_ratio_test(smaller: Fit, larger: Fit) -> xr.Dataset:
    """Whether the parameters that a larger model adds are worth having.

    Parameters
    ----------
    smaller, larger : Fit
        Nested, fitted to the same outcomes.

    Returns
    -------
    Dataset
        ``statistic``, ``added_parameters``, ``p_value``.

    Raises
    ------
    RangeError
        If the larger does not have more parameters or its likelihood is lower.

    Notes
    -----
    Twice the difference of ln L against chi-square; not valid where the smaller is at a bound of the
    larger.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
    >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
    >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
    >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
    >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
    >>> small = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
    >>> large = fit(seen, HazardModel([Compartment(240.0, 1e-3)]), ["gain_1", "half_time_1"])
    >>> int(likelihood_ratio_test(small, large).added_parameters)
    1
    """
    from scipy.stats import chi2

    added = len(larger.names) - len(smaller.names)
    statistic = 2.0 * (larger.log_likelihood - smaller.log_likelihood)
    if added < 1:
        raise RangeError("the larger model has no more parameters than the smaller")
    if statistic < -1e-6:
        raise RangeError(
            "the larger model fits worse: its likelihood was not maximized, or they are not nested"
        )
    statistic = max(statistic, 0.0)
    ds = xr.Dataset()
    ds["statistic"] = ((), statistic, {"units": "1", "long_name": "twice the difference of ln L"})
    ds["added_parameters"] = ((), added, {"units": "1", "long_name": "parameters added"})
    ds["p_value"] = (
        (),
        float(chi2.sf(statistic, added)),
        {"units": "1", "long_name": "probability of so large a difference without the added parameters"},
    )
    ds.attrs = dataset_attributes(
        "likelihood-ratio test", "risk", references=["weathersby_1984"], comment=_NOTE
    )
    return ds


def goodness_of_fit(fitted: Fit, bins: int = 5) -> xr.Dataset:
    """Predicted against observed events in bins of predicted risk.

    Parameters
    ----------
    fitted : Fit
        A fit of sickness without severity.
    bins : int, default 5
        Bins of about equal predicted events; fewer where one exposure fills several.

    Returns
    -------
    Dataset
        On ``bin``: ``exposures``, ``predicted``, ``observed``, ``mean_probability``, ``pearson``; attributes
        ``chi_square``, ``degrees_of_freedom``, ``p_value``.

    Raises
    ------
    RangeError
        If there are fewer distinct exposures than bins, or too few bins for the parameters.

    Notes
    -----
    Pearson (O - E)^2/(E (1 - E/n)) over the bins, against chi-square with bins - parameters degrees of
    freedom. Marginal events count by their weight.

    Examples
    --------
    >>> from gasphys import Exposure
    >>> from gasphys.risk import Compartment, HazardModel, Outcome, fit
    >>> dives = [Exposure.start("air").travel(depth=d, minutes=2).stay(60) for d in (18, 24, 30)]
    >>> dives = [x.travel(depth=0, minutes=3) for x in dives]
    >>> seen = [Outcome(x, "none", count=50 - k) for x, k in zip(dives, (1, 2, 4))]
    >>> seen += [Outcome(x, "event", count=k) for x, k in zip(dives, (1, 2, 4))]
    >>> fitted = fit(seen, HazardModel([Compartment(240.0, 1e-3)]))
    >>> goodness_of_fit(fitted, bins=2).sizes["bin"]
    2
    """
    from scipy.stats import chi2

    one = fitted._likelihood
    if fitted.serious is not None:
        raise GasphysError("goodness of fit is of one outcome; fit without serious=")
    values = dict(zip(fitted.names, fitted.result["estimate"].values.tolist(), strict=True))
    chance = risk_probability.raw(one.hazards(values, one.model)[2].real)
    risks, which = np.unique(chance, return_inverse=True)  # one exposure stays in one bin
    freedom = bins - len(fitted.names)
    if freedom < 1 or risks.size < bins:
        raise RangeError(f"{bins} bins for {len(fitted.names)} parameters and {risks.size} distinct risks")
    expected = chance * one.count
    before = np.cumsum(np.bincount(which, weights=expected)) - 0.5 * np.bincount(which, weights=expected)
    place = np.minimum((before / expected.sum() * bins).astype(int), bins - 1)[which]
    place = np.unique(place, return_inverse=True)[1]  # where one exposure fills more than its bin
    bins = int(place.max()) + 1
    freedom = bins - len(fitted.names)

    def add(column: Array) -> Array:
        return np.bincount(place, weights=column, minlength=bins)

    exposures, predicted, observed = add(one.count), add(expected), add(one.count * one.share)
    if freedom < 1:
        raise RangeError(f"a few exposures carry most of the risk: only {bins} bins can be filled")
    pearson = (observed - predicted) ** 2 / (predicted * (1.0 - predicted / exposures))
    ds = xr.Dataset(coords={"bin": np.arange(1, bins + 1)})
    for name, column, meaning in (
        ("exposures", exposures, "exposures in the bin"),
        ("predicted", predicted, "events predicted"),
        ("observed", observed, "events observed, marginal ones by their weight"),
        ("mean_probability", predicted / exposures, "mean predicted probability"),
        ("pearson", pearson, "share of the chi-square"),
    ):
        ds[name] = ("bin", column, {"units": "1", "long_name": meaning})
    total = float(pearson.sum())
    ds.attrs = dataset_attributes(
        "predicted and observed events in bins of predicted risk",
        f"risk, {fitted.model.name}",
        references=["weathersby_1984"],
        comment=_NOTE,
        chi_square=total,
        degrees_of_freedom=freedom,
        p_value=float(chi2.sf(total, freedom)),
    )
    return ds
