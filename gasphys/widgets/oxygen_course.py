"""What a course of treatments adds up to in oxygen, and the sessions each limit leaves."""

from __future__ import annotations

import datetime
import functools
from typing import Any, ClassVar
from weakref import WeakKeyDictionary

import numpy as np
import xarray as xr

from gasphys.doses import MEASURES, Course, Session, course_doses, oxygen, sessions_left
from gasphys.errors import unknown_name
from gasphys.explanation import explain
from gasphys.exposure import Exposure
from gasphys.plots.course import CourseLadders, course_figure
from gasphys.quantities import attributes
from gasphys.schedules import treatment
from gasphys.schedules.tables import names
from gasphys.widgets.base import App, Name, Number, shown, start_values

__all__ = ["OxygenCourse"]

_START = start_values()["oxygen_course"]
_MEASURES = ("uptd", "esot", "vital_capacity_loss")
_ROLES = ("patient", "diver", "attendant")
#: Ladders drawn; the picture is as high as they need.
_LADDERS = 5


def _role(text: str) -> str:
    if text not in _ROLES:
        raise unknown_name("role", text, _ROLES)
    return text


def _schedule(text: str) -> str:
    if text not in names():
        raise unknown_name("schedule", text, names())
    return text


@functools.cache
def _session(schedule: str, attendant: bool) -> Exposure:
    return treatment(schedule, attendant=attendant)


class OxygenCourse(App):
    """Oxygen doses of a course of sessions and how many more each limit leaves.

    Parameters
    ----------
    **start
        Start values of blanks: ``role``, ``session_count``, ``schedule``.

    Raises
    ------
    GasphysError
        If a start value is not possible.

    Notes
    -----
    One session a day from Monday to Friday, all alike; everything breathed counts, air breaks and
    travel too (:func:`gasphys.doses.course_doses`, :func:`gasphys.doses.sessions_left`).

    Examples
    --------
    >>> app = OxygenCourse(session_count=4)
    >>> app.answer(app.compute())[:37]
    '4 sessions add up to 1178 UPTD if not'
    """

    sentence = (
        "A person in the role of {role} has {session_count} sessions of {schedule}, one a day from Monday "
        "to Friday."
    )
    blanks: ClassVar = {
        "role": Name(_role, _ROLES),
        "session_count": Number("session_count", whole=True),
        "schedule": Name(_schedule, names()),
    }
    name = "oxygen_course"
    rows = "session"
    size = (7.4, 0.9 + 0.75 * _LADDERS)
    explained: ClassVar = {
        "uptd": "UPTD of the course",
        "vital_capacity_loss": "loss of vital capacity",
        "cns_risk_dry_rest": "risk of any sign in a session",
    }

    def __init__(self, **start: Any) -> None:
        super().__init__(**{**{name: _START[name] for name in self.blanks}, **start})
        self._pictures: WeakKeyDictionary[Any, CourseLadders] = WeakKeyDictionary()

    def _exposure(self) -> Exposure:
        return _session(self.params["schedule"], self.params["role"] == "attendant")

    def course(self) -> Course:
        """Return the course that the sentence describes.

        Returns
        -------
        Course
            From the first Monday of the demo scenario on.

        Examples
        --------
        >>> str(OxygenCourse(session_count=6).course().sessions[-1].day)
        '2042-03-10'
        """
        session, label = self._exposure(), self.params["schedule"]
        days = (7 * (n // 5) + n % 5 for n in range(round(self.params["session_count"])))
        return Course(
            tuple(Session(_START["start"] + datetime.timedelta(days=d), session, label) for d in days)
        )

    def _doses(self) -> xr.Dataset:
        return course_doses(self.course(), (*_MEASURES, "cns_risk_dry_rest"), role=self.params["role"])

    def compute(self) -> xr.Dataset:
        """Return the doses session by session and the ladders.

        Returns
        -------
        Dataset
            Along ``session``: ``uptd``, ``esot`` and ``vital_capacity_loss`` after it and
            ``cns_risk_dry_rest``, of any sign in it, beside ``seizure_rate_low`` and ``_high`` of
            clinics; along ``ladder`` what :func:`gasphys.doses.sessions_left` gives, each name after
            ``ladder_``.

        Raises
        ------
        GasphysError
            If the schedule is not known for the role.

        Examples
        --------
        >>> ds = OxygenCourse(session_count=2).compute()
        >>> ds.uptd.values.round(1).tolist()
        [294.5, 589.1]
        """
        role = self.params["role"]
        found, left = self._doses(), sessions_left(self.course(), role=role)
        variables: dict[str, Any] = {}
        for name in _MEASURES:
            one, row = attributes(MEASURES[name].quantity), found.sel(measure=name)
            variables[name] = (
                "session",
                row["course_dose"].values,
                {
                    "units": one["units"],
                    "long_name": f"{one['long_name']}, after the session",
                    "rule": str(row["course_rule"].values),
                },
            )
        risk = found.sel(measure="cns_risk_dry_rest")
        variables["cns_risk_dry_rest"] = (
            "session",
            risk["session_dose"].values,
            {
                "units": "1",
                "long_name": "risk of any nervous system sign in the session, dry rest; not of a seizure",
            },
        )
        for name in ("seizure_rate_low", "seizure_rate_high"):
            variables[name] = risk[name].variable
        variables |= {f"ladder_{name}": left[name].variable for name in left.data_vars}
        number = ("session", found["session"].values, {"units": "1", "long_name": "session, from 0"})
        coords = {"session": number, "ladder": left["ladder"].values}
        flag = str(found["course_reason"].sel(measure="vital_capacity_loss").values)
        attrs = {**left.attrs, "title": found.attrs["title"], "flag": flag}
        return xr.Dataset(variables, coords, attrs)

    def draw(self, figure: Any, ds: xr.Dataset) -> None:
        """Draw the dataset; on a figure drawn before, move its artists.

        Parameters
        ----------
        figure : matplotlib.figure.Figure
            Empty at first.
        ds : Dataset
            As :meth:`compute` returns it.

        Examples
        --------
        >>> from gasphys.plots.style import new_figure
        >>> app = OxygenCourse()
        >>> app.draw(new_figure(*app.size), app.compute())
        """
        if figure not in self._pictures:
            self._pictures[figure] = CourseLadders(figure, ds.sizes["ladder"])
        self._pictures[figure].update(_ladders(ds))

    def figure(self) -> Any:
        """Return the picture on a figure of its own, with the caution.

        Returns
        -------
        matplotlib.figure.Figure
            The figure.

        Examples
        --------
        >>> len(OxygenCourse().figure().axes)
        1
        """
        return course_figure(_ladders(self.compute()))

    def answer(self, ds: xr.Dataset) -> str:
        """Return the answer in one sentence.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        str
            With units.

        Examples
        --------
        >>> app = OxygenCourse(session_count=1)
        >>> app.answer(app.compute())[-46:]
        'no limit made for a patient is passed by then.'
        """
        last, role, count = ds.isel(session=-1), self.params["role"], ds.sizes["session"]
        loss = float(last["vital_capacity_loss"])
        power = "is not defined" if np.isnan(loss) else f"is {shown(100.0 * loss, 3)} %"
        passed = [
            f"{row['ladder_authority'].values}, with session {float(row['ladder_passed_with']):.0f}"
            for row in (ds.sel(ladder=n) for n in ds["ladder"].values)
            if str(row["ladder_status"].values) == "beyond" and np.isfinite(row["ladder_passed_with"])
        ]
        whose = f"an {role}" if role[0] in "aeiou" else f"a {role}"
        limits = (
            f"limits made for {whose} are passed: {'; '.join(passed)}."
            if passed
            else f"no limit made for {whose} is passed by then."
        )
        add = "sessions add" if count > 1 else "session adds"
        return (
            f"{count} {add} up to {float(last['uptd']):.0f} UPTD if nothing recovers, and the loss of vital "
            f"capacity by the power equation, with recovery between sessions, {power}; {limits}"
        )

    def notes(self, ds: xr.Dataset) -> list[str]:
        """Return what must stand beside the answer, and what it assumes.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.

        Returns
        -------
        list of str
            One sentence each.

        Examples
        --------
        >>> app = OxygenCourse()
        >>> app.notes(app.compute())[0][:40]
        'Risk of any nervous system sign in one s'
        """
        notes = [str(ds.attrs["any_sign"])]
        if ds.attrs["flag"]:
            notes.append(f"Beyond the evidence: {ds.attrs['flag']}.")
        notes.append("No sum over weeks was ever tested; limits made for others are context only.")
        notes.append("Everything breathed counts, air breaks and travel too.")
        known = sorted({str(v).replace("_", ", ") for v in ds["ladder_provenance"].values})
        notes.append(f"The limits are known by: {'; '.join(known)}.")
        return notes

    def explain(self, ds: xr.Dataset, name: str) -> str:
        """Return the working of one number after the last session, and that of a session.

        Parameters
        ----------
        ds : Dataset
            As :meth:`compute` returns it.
        name : str
            A key of :attr:`explained`.

        Returns
        -------
        str
            Equations, inputs, constants, sources.

        Examples
        --------
        >>> app = OxygenCourse(session_count=2)
        >>> app.explain(app.compute(), "uptd").splitlines()[0][:17]
        'course_dose = 589'
        """
        session = oxygen(self._exposure(), [name], role=self.params["role"])
        of_one = str(explain(session, "dose", measure=name))
        if name not in _MEASURES:
            return of_one
        whole = explain(self._doses(), "course_dose", measure=name, session=ds.sizes["session"] - 1)
        return f"{whole}\n\nOne session:\n{of_one}"

    def lines(self) -> str:
        """Return the Python lines that reproduce ``ds`` and ``figure``.

        Returns
        -------
        str
            To paste into a cell or a script.

        Examples
        --------
        >>> print(OxygenCourse().lines().splitlines()[3])
        session = gp.schedules.treatment('clinical_2_4_atm', attendant=False)
        """
        role, schedule = self.params["role"], self.params["schedule"]
        measures = (*_MEASURES, "cns_risk_dry_rest")
        return (
            "import datetime\n"
            "import gasphys as gp\n"
            "\n"
            f"session = gp.schedules.treatment({schedule!r}, attendant={role == 'attendant'})\n"
            f"start = {_START['start']!r}\n"
            f"days = [7 * (n // 5) + n % 5 for n in range({round(self.params['session_count'])})]\n"
            "course = gp.doses.Course(\n"
            "    tuple(\n"
            f"        gp.doses.Session(start + datetime.timedelta(d), session, {schedule!r})\n"
            "        for d in days\n"
            "    )\n"
            ")\n"
            f"doses = gp.doses.course_doses(course, {measures!r}, role={role!r})\n"
            'ds = doses.course_dose.to_dataset("measure")\n'
            'ds["cns_risk_dry_rest"] = doses.session_dose.sel(measure="cns_risk_dry_rest")\n'
            f"figure = gp.plots.course_figure(gp.doses.sessions_left(course, role={role!r}))\n"
        )


def _ladders(ds: xr.Dataset) -> xr.Dataset:
    """Return the ladders as :func:`gasphys.doses.sessions_left` names them."""
    names = [str(n) for n in ds.data_vars if str(n).startswith("ladder_")]
    return ds[names].rename({n: n.removeprefix("ladder_") for n in names})
