"""Make the demo inputs of this folder: `python make_data.py` writes them beside itself.

Invented scenario. Places, people, measurements and events do not exist; they were made to show the
software. Running it again gives the same files, byte for byte.
"""

from __future__ import annotations

import datetime
import sys
from pathlib import Path

import numpy as np

NOTICE = (
    "# Invented scenario. Places, people, measurements and events do not exist; they were made to show "
    "the software.\n"
)

PERSON = """\
# P-01: late radiation injury, before the first session of protocol O-24.
code = "P-01"
role = "patient"
hemoglobin = 12.9  # g/dL

[sample]  # arterial sample at the bedside
arterial_po2 = 25.3  # kPa
fio2 = 0.40
arterial_pco2 = 5.2  # kPa
barometric_pressure = 101.0  # kPa absolute
"""


def chamber_log() -> str:
    """Protocol O-24 as the recorder wrote it, every 10 s, with the faults of a real recorder.

    120 min: 10 min compression on air, 3 x 30 min on oxygen with two 5-min air breaks at 2.4 atm abs,
    10 min decompression on oxygen.
    """
    rng = np.random.default_rng(20420303)
    surface, bottom = 101.0, 2.4 * 101.325
    seconds = np.arange(0, 7201, 10)
    pressure = np.interp(seconds, [0, 600, 6600, 7200], [surface, bottom, bottom, surface])
    pressure = pressure + rng.normal(0.0, 0.15, len(seconds))
    begins = [0, 600, 2400, 2700, 4500, 4800]  # s
    gas = ["air", "oxygen", "air", "oxygen", "air", "oxygen"]
    clock_zero = datetime.datetime(2042, 3, 3, 8, 0, 0)

    rows = []
    for s, p in zip(seconds.tolist(), pressure.tolist(), strict=True):
        if 1500 < s < 1570:  # the recorder lost 70 s
            continue
        # Set back by 3 min at 08:55, when somebody compared it with the clock on the wall.
        shown = clock_zero + datetime.timedelta(seconds=s - (180 if s >= 3300 else 0))
        breathed = gas[int(np.searchsorted(begins, s, side="right")) - 1]
        rows.append(f"{shown.isoformat()};{p:.2f};{breathed}")
        if s == 3000:  # one reading sent twice
            rows.append(f"{shown.isoformat()};{p + 0.05:.2f};{breathed}")
        if s == 5400:  # one reading typed in again by hand
            rows[-1] = rows[-1].replace(".", ",")
    head = (
        "# The unit: P-01, session 1 of 40, protocol O-24; barometer 101.0 kPa; decompression on oxygen\n"
        "time;pressure_abs_kPa;gas\n"
    )
    return NOTICE + head + "\n".join(rows) + "\n"


#: minute, depth in msw, gas from here on, O2 uptake in L/min STPD from here on.
#: 20 msw/min down, 22 min to the start of the ascent, 9 msw/min up, the last 3 msw in 1 min.
DIVE = [
    (0.0, 0, "trimix 17/48", 1.0),
    (2.8, 56, "trimix 17/48", 1.5),
    (22.0, 56, "trimix 17/48", 1.0),
    (26.0, 20, "nitrox 48", 0.8),
    (28.0, 20, "nitrox 48", 0.8),
    (28.56, 15, "nitrox 48", 0.8),
    (31.0, 15, "nitrox 48", 0.8),
    (31.33, 12, "nitrox 48", 0.8),
    (35.0, 12, "nitrox 48", 0.8),
    (35.33, 9, "nitrox 48", 0.8),
    (41.0, 9, "nitrox 48", 0.8),
    (41.33, 6, "oxygen", 0.8),
    (49.0, 6, "oxygen", 0.8),
    (49.33, 3, "oxygen", 0.8),
    (62.0, 3, "oxygen", 0.8),
    (63.0, 0, "oxygen", 0.8),
]


def dive_log(loop: bool) -> str:
    """The dive in the sound: D-1 on open circuit, or D-2 beside D-1 on a loop."""
    rng = np.random.default_rng(56)
    rows = []
    for (minute, depth, gas, uptake), after in zip(DIVE, [*DIVE[1:], None], strict=True):
        # Written at irregular times, one to three minutes apart, and at every change.
        times = [minute]
        while after and times[-1] + 3.0 < after[0]:
            times.append(round(times[-1] + float(rng.uniform(1.0, 3.0)), 2))
        for time in times:
            here = depth if after is None else np.interp(time, [minute, after[0]], [depth, after[1]])
            breathed = "trimix 17/48,130" if loop else gas
            rows.append(f"{time:.2f},{here:.1f},{breathed},{uptake}")
    who = (
        "D-2 on a loop, diluent trimix 17/48, set-point 130 kPa"
        if loop
        else "D-1 on trimix 17/48, nitrox 48 from 20 msw, oxygen from 6 msw"
    )
    head = (
        f"# The sound: 56 msw, 22 min with the descent, working; {who}; stops invented, not a plan to dive\n"
        f"time_min,depth_msw,gas,{'setpoint_kPa,' if loop else ''}o2_uptake_stpd\n"
    )
    return NOTICE + head + "\n".join(rows) + "\n"


#: Cylinders and rates are invented too.
SUPPLY = """\
# D-1's gas for the dive in the sound: what is carried, who breathes how much, what is kept back.
exposure = "dive_in_the_sound.csv"
surface_pressure = "101.0 kPa"
water_temperature = "9 degC"

[[cylinder]]
name = "back"
gas = "trimix 17/48"
water_capacity = "12 L"
count = 2
pressure_gauge = "219 bar"

[[cylinder]]
name = "left side"
gas = "nitrox 48"
water_capacity = "7 L"
pressure_gauge = "190 bar"

[[cylinder]]
name = "right side"
gas = "oxygen"
water_capacity = "5.7 L"
pressure_gauge = "140 bar"

[demand]
surface_rate = { others = "20 L/min", ascent = "16 L/min" }

[reserve]
persons = 2  # on one gas, to the next switch
minutes = 2  # before they leave
[reserve.demand]
surface_rate = "30 L/min"

[ascent]
model = "buhlmann_1995_c"
gases = ["nitrox 48 from 20 msw", "oxygen from 6 msw"]
moments = [12, 22, 30]
"""


def course() -> str:
    """P-01's course: 40 sessions on weekdays from 3 March to 25 April 2042, 08:00."""
    day, rows = datetime.date(2042, 3, 3), []
    while day <= datetime.date(2042, 4, 25):
        if day.weekday() < 5:
            rows.append(f"{day.isoformat()},08:00,clinical_2_4_atm,P-01")
        day += datetime.timedelta(days=1)
    return NOTICE + "date,time,schedule,person\n" + "\n".join(rows) + "\n"


#: Name of every file to the text it holds.
FILES = {
    "p01_chamber_log.csv": chamber_log,
    "dive_in_the_sound.csv": lambda: dive_log(loop=False),
    "dive_in_the_sound_loop.csv": lambda: dive_log(loop=True),
    "dive_in_the_sound_supply.toml": lambda: NOTICE + SUPPLY,
    "p01_course.csv": course,
    "p01.toml": lambda: NOTICE + PERSON,
}

if __name__ == "__main__":
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent
    for name, text in FILES.items():
        (folder / name).write_bytes(text().encode())
