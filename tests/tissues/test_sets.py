"""Integrity of the shipped parameter sets, and a user's own file in the same format."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

import gasphys as gp
from gasphys import Exposure, tissues
from gasphys.errors import InputFileError, UnknownNameError, ValidityError
from gasphys.policy import PROVENANCE
from gasphys.tissues.sets import _Reader, _shipped

from .printed import read
from .sets import THREE_GASES

FSW = 101.325 / 33.0
NAMES = (
    "boycott_1908", "us_navy_1957", "workman_1965", "rogers_powell_1994", "buhlmann_1983", "buhlmann_1995_a",
    "buhlmann_1995_b", "buhlmann_1995_c", "thalmann_vval18", "thalmann_vval18m_reconstructed",
    "kidd_stubbs_1983",
)  # fmt: skip


def test_the_sets_are_the_files() -> None:
    assert set(tissues.models()) == set(NAMES)
    folder = Path(gp.__file__).parent / "tissues"
    assert {p.stem for p in folder.glob("*.toml")} == set(tissues.models())


@pytest.mark.parametrize("name", NAMES)
def test_every_set_says_what_it_is_for(name: str) -> None:
    one = tissues.load(name)
    for text in (
        one.title,
        one.edition,
        one.source,
        one.depth,
        one.refuses,
        one.does_not_claim,
        one.start,
        one.on_the_way,
    ):
        assert text
    assert one.source in gp.sources.sources()
    assert set(one.provenance_of.values()) <= set(PROVENANCE)
    assert set(one.tested) <= {"before_leaving", "on_arrival"}
    assert one.tested
    assert re.fullmatch("[0-9a-f]{12}", one.digest)
    assert one.name in str(one)
    assert one.does_not_claim in str(one)
    shape = (len(one.compartments), len(one.inert_gases))
    assert one.half_time.shape == one.a.shape == one.b.shape == shape
    assert not one.a.flags.writeable
    assert all(isinstance(c, str) for c in one.compartments)
    assert tissues.load(name) is one


def test_inert_gases_and_refusals() -> None:
    assert tissues.load("buhlmann_1995_c").inert_gases == ("N2", "He")
    assert tissues.load("workman_1965").inert_gases == ("N2", "He")
    for total in ("boycott_1908", "kidd_stubbs_1983"):
        assert tissues.load(total).inert_gases == ("total",)
        with pytest.raises(ValidityError, match="air only"):
            tissues.tensions(Exposure.start("nitrox 32").stay(1), total)
    for nitrogen in ("buhlmann_1983", "us_navy_1957", "rogers_powell_1994", "thalmann_vval18"):
        with pytest.raises(ValidityError, match="breathed with He"):
            tissues.tensions(Exposure.start("trimix 17/48").stay(1), nitrogen)
        with pytest.raises(ValidityError, match="refuses"):
            tissues.no_stop_time(10.0, "heliox 20/80", nitrogen)
    with pytest.raises(ValidityError, match="breathed with H2"):
        tissues.tensions(Exposure.start(gp.Gas(oxygen=0.04, hydrogen=0.96)).stay(1))


# -- The numbers against what is printed beside them ------------------------------------------------


def test_zh_l16_against_its_formulas_and_printed_m_values() -> None:
    rows = read("buhlmann_zhl16")
    names = [r["compartment"] for r in rows]
    half = np.array([float(r["t_half_N2_min"]) for r in rows])
    for letter in "abc":
        for c, row in zip(names, rows, strict=True):
            one = tissues.load(f"buhlmann_1995_{letter}", compartments=[c])
            printed = float(row[f"M_N2_{letter.upper()}_at_1bar_msw"])
            m = tissues.m_value.raw(100.0, one.a[0], one.b[0]) / 10.0
            assert m[0] == pytest.approx(printed, abs=5.1e-3), (letter, c)
            assert m[1] == pytest.approx(float(row["M_He_at_1bar_msw"]), abs=5.1e-3)
            assert 1.0 / one.b[0, 0] == pytest.approx(float(row["dM_N2"]), abs=5.1e-5)
            assert 1.0 / one.b[0, 1] == pytest.approx(float(row["dM_He"]), abs=5.1e-5)
    # Every a of set A follows from the half-time to four decimals; b does in all but compartment 4.
    every = [tissues.load("buhlmann_1995_a", compartments=[c]) for c in names]
    a = np.array([one.a[0, 0] for one in every]) / 100.0
    b = np.array([one.b[0, 0] for one in every])
    np.testing.assert_allclose(a, 2.0 * half ** (-1.0 / 3.0), rtol=0.0, atol=5.1e-5)
    apart = np.abs(b - (1.005 - half**-0.5)) > 1.0e-4
    assert [n for n, x in zip(names, apart, strict=True) if x] == ["4"]
    assert b[names.index("4")] == 0.7825
    formula = tissues.load("buhlmann_1995_a", variant="b4_formula")
    assert formula.b[3, 0] == 0.7725
    assert tissues.m_value.raw(100.0, formula.a[3, 0], 0.7725) / 100.0 == pytest.approx(2.0507, abs=5e-5)
    assert tissues.m_value.raw(100.0, formula.a[3, 0], 0.7825) / 100.0 == pytest.approx(2.0342, abs=5.1e-5)
    # Swapped digits circulate: a of compartment 8 is 0.4701.
    assert a[names.index("8")] == pytest.approx(0.4701)


@pytest.mark.parametrize("name", ["buhlmann_1983", "buhlmann_1995_a", "buhlmann_1995_b", "buhlmann_1995_c"])
def test_a_falls_and_b_rises_with_half_time(name: str) -> None:
    one = tissues.load(name)
    assert (np.diff(one.half_time, axis=0) > 0.0).all()
    assert (np.diff(one.a, axis=0) <= 0.0).all()
    assert (np.diff(one.b, axis=0) >= 0.0).all()
    if name == "buhlmann_1983":  # the name is said to count twelve pairs; the remembered list has eleven
        assert len({*zip(one.a[:, 0], one.b[:, 0], strict=True)}) == 11


def test_helium_half_times_are_nitrogen_over_root_of_masses() -> None:
    one = tissues.load("buhlmann_1995_a")
    ratio = one.half_time[:, 0] / one.half_time[:, 1]
    np.testing.assert_allclose(ratio[1:], np.sqrt(28.013 / 4.0026), rtol=2e-3)
    other = tissues.load("buhlmann_1995_a", variant="helium_2_65")
    np.testing.assert_allclose(other.half_time[1:, 0] / other.half_time[1:, 1], 2.65, rtol=1e-2)
    # The helium a must not come from the nitrogen formula: it is larger from compartment 9 on.
    by_formula = 2.0 * one.half_time[:, 0] ** (-1.0 / 3.0) * 2.6458 ** (1.0 / 3.0)
    assert (one.a[8:, 1] / 100.0 > by_formula[8:] + 0.01).all()


def test_b_and_c_change_a_only_and_only_downward() -> None:
    a, b, c = (tissues.load(f"buhlmann_1995_{x}") for x in "abc")
    for other, changed in ((b, {"6", "7", "8", "13"}), (c, {str(n) for n in range(5, 16)})):
        np.testing.assert_array_equal(other.b, a.b)
        np.testing.assert_array_equal(other.a[:, 1], a.a[:, 1])
        assert {
            n for n, x, y in zip(a.compartments, other.a[:, 0], a.a[:, 0], strict=True) if x != y
        } == changed
        assert (other.a <= a.a).all()


def test_zh_l12_m_column() -> None:
    one = tissues.load("buhlmann_1983")
    for m, row in zip(
        tissues.m_value.raw(100.0, one.a, one.b)[:, 0] / 10.0, read("buhlmann_zhl12"), strict=True
    ):
        assert m == pytest.approx(float(row["M_N2_at_1bar_msw"]), abs=5.1e-3)


def test_navy_sets_as_printed() -> None:
    one = tissues.load("us_navy_1957")
    surfacing = tissues.m_value.raw(101.325, one.a, one.b)[:, 0] / FSW
    for m, row in zip(surfacing, read("usn1957_compartments"), strict=True):
        assert m == pytest.approx(float(row["M0_N2_fsw"]), rel=1e-12)
        assert m / 33.0 == pytest.approx(float(row["surfacing_ratio_M0_over_33"]), abs=5.1e-3)
    # The 40-min tissue of 1965: a = 9.800 fsw, b = 0.714286 [computed].
    workman = tissues.load("workman_1965", compartments=["40"])
    assert workman.a[0, 0] / FSW == pytest.approx(9.8, abs=5e-4)
    assert workman.b[0, 0] == pytest.approx(0.714286, abs=5e-7)
    # Never pair the slopes of 1957 with the surfacing values of 1965.
    assert tissues.load("us_navy_1957", compartments=["40"]).b[0, 0] == pytest.approx(1.0 / 1.34)


def test_rogers_powell_in_both_printed_units() -> None:
    one = tissues.load("rogers_powell_1994")
    assert one.surfacing_only
    for m, row in zip(one.a[:, 0], read("rogers_powell1994"), strict=True):
        # The msw column is the fsw column over 3.257, rounded.
        assert m / FSW / 3.257 == pytest.approx(float(row["M0_N2_msw"]), abs=6e-3)


def test_thalmann_rows_rise_by_ten_for_ten() -> None:
    """Row 10 is the limit for leaving to the surface, row 20 for arriving at 10 fsw, and so on."""
    one = tissues.load("thalmann_vval18")
    for row in read("thalmann_vval18_mptt"):
        arriving = float(row["MPTT_row_depth_fsw"]) - 10.0
        m = tissues.m_value.raw((33.0 + arriving) * FSW, one.a[:, 0], one.b[:, 0]) / FSW
        printed = [float(row[f"{c}_min_fsw"]) for c in one.compartments]
        np.testing.assert_allclose(m, printed, rtol=1e-12)
    m = tissues.load("thalmann_vval18m_reconstructed")
    np.testing.assert_array_equal(m.a, one.a)
    assert m.convention["gas_phase_overpressure"] == pytest.approx(10.0 * FSW)
    assert m.provenance_of["N2"] == "memory_low"


def test_ratio_models_have_no_intercept() -> None:
    one = tissues.load("boycott_1908")
    assert not one.a.any()
    np.testing.assert_array_equal(one.b, 0.5)
    serial = tissues.load("kidd_stubbs_1983")
    assert np.isnan(serial.half_time).all()
    assert np.isnan(serial.a[2:]).all()
    # SAD = P/R - OFF.
    np.testing.assert_allclose(
        (200.0 - serial.a[:2, 0]) * serial.b[:2, 0], [200.0 / 1.3 - 48.0, 200.0 / 1.385 - 25.0]
    )


def _column(name: str, key: str) -> np.ndarray:
    return np.array([float(row[key]) for row in read(name)])


def test_every_number_of_the_sets_is_that_of_its_table() -> None:
    """Row by row and column by column, typed a second time in the tables."""

    def same(found: np.ndarray, name: str, key: str, unit: float = 1.0) -> None:
        np.testing.assert_allclose(found / unit, _column(name, key), rtol=1e-12)

    for letter in "abc":
        for k, row in enumerate(read("buhlmann_zhl16")):
            one = tissues.load(f"buhlmann_1995_{letter}", compartments=[row["compartment"]])
            for found, keys, unit in (
                (one.half_time[0], ("t_half_N2_min", "t_half_He_min"), 1.0),
                (one.a[0], (f"a_N2_{letter.upper()}_bar", "a_He_bar"), 100.0),
                (one.b[0], ("b_N2", "b_He"), 1.0),
            ):
                np.testing.assert_allclose(found / unit, [float(row[key]) for key in keys], rtol=1e-12)
            other = tissues.load("buhlmann_1995_a", compartments=[row["compartment"]], variant="helium_2_65")
            assert other.half_time[0, 1] == float(row["t_half_He_min_print2_N2_over_2p65"]), k
    l12 = tissues.load("buhlmann_1983")
    same(l12.half_time[:, 0], "buhlmann_zhl12", "t_half_N2_min")
    same(l12.a[:, 0], "buhlmann_zhl12", "a_N2_bar", 100.0)
    same(l12.b[:, 0], "buhlmann_zhl12", "b_N2")
    rogers = tissues.load("rogers_powell_1994")
    same(rogers.half_time[:, 0], "rogers_powell1994", "t_half_min")
    same(rogers.a[:, 0], "rogers_powell1994", "M0_N2_fsw", FSW)
    navy = tissues.load("us_navy_1957")
    same(navy.half_time[:, 0], "usn1957_compartments", "t_half_min")
    same(1.0 / navy.b[:, 0], "usn1957_compartments", "dM_fsw_per_fsw")
    workman = tissues.load("workman_1965")
    surfacing = tissues.m_value.raw(101.325, workman.a, workman.b)
    for g, gas in enumerate(("N2", "He")):
        same(workman.half_time[:, g], "workman1965", "t_half_min")
        same(surfacing[:, g], "workman1965", f"M0_{gas}_fsw", FSW)
        same(1.0 / workman.b[:, g], "workman1965", f"dM_{gas}")
    haldane = tissues.load("boycott_1908")
    same(haldane.half_time[:, 0], "haldane1908", "t_half_min")
    same(1.0 / haldane.b[:, 0], "haldane1908", "max_ratio_total_pressure")
    # 2:1 on total pressure is 1.58:1 on nitrogen.
    same(0.79 / haldane.b[:, 0], "haldane1908", "equiv_N2_over_ambient")
    constants = {row["symbol"]: float(row["value_fsw"]) for row in read("thalmann_constants")}
    for name, overpressure in (
        ("thalmann_vval18", "PBOVP (VVal-18)"),
        ("thalmann_vval18m_reconstructed", "PBOVP (VVal-18M)"),
    ):
        one = tissues.load(name)
        for key, symbol in (
            ("arterial_pco2", "PACO2"),
            ("water_vapor_pressure", "PH2O"),
            ("venous_pco2", "PVCO2"),
            ("venous_po2", "PVO2"),
            ("gas_phase_overpressure", overpressure),
        ):
            assert one.convention[key] / FSW == pytest.approx(constants[symbol], rel=1e-12)
        assert one.half_time[:, 0].tolist() == [5.0, 10.0, 20.0, 40.0, 80.0, 120.0, 160.0, 200.0, 240.0]
    serial = tissues.load("kidd_stubbs_1983")
    assert serial.convention["flow_coefficient"] * 10.0 == pytest.approx(0.0002596, rel=1e-12)
    assert serial.convention["flow_offset"] / 10.0 == pytest.approx(83.67, rel=1e-12)
    # The multiplier of the rate is 1 in every compartment, alveolar and ambient O2 the same: not in the code.
    assert constants["SDR"] == 1.0
    assert constants["AMBAO2"] == 0.0


def test_conventions_give_the_printed_start_tensions() -> None:
    """At 760 mmHg and 0.79: exchange ratio 0.9 566.8, dry 600.4, Thalmann 565.9 mmHg [computed]."""
    mmhg = 0.133322387415
    for model, variant, expected in (
        ("workman_1965", "exchange_ratio_0_9", 566.8),
        ("workman_1965", "", 600.4),
        ("us_navy_1957", "", 600.4),
        ("thalmann_vval18", "", 565.9),
    ):
        one = tissues.load(model, variant=variant)
        start = tissues.tensions(Exposure.start("air").stay(1), one).initial.sel(inert_gas="N2").values
        np.testing.assert_allclose(start / mmhg, expected, rtol=0.0, atol=0.051)


# -- Choosing ---------------------------------------------------------------------------------------


def test_compartments_by_name() -> None:
    one = tissues.load("buhlmann_1995_a")
    assert one.compartments == tuple(str(n) for n in range(1, 17))
    other = tissues.load("buhlmann_1995_a", compartments=["1b", *one.compartments[1:]])
    assert other.half_time[0].tolist() == [5.0, 1.88]
    with pytest.raises(UnknownNameError, match="1 and 1b"):
        tissues.load("buhlmann_1995_a", compartments=["1", "1b"])
    with pytest.raises(UnknownNameError, match="valid: 1, 10"):
        tissues.load("buhlmann_1995_a", compartments=["17"])
    with pytest.raises(UnknownNameError, match="each once"):
        tissues.load("buhlmann_1995_a", compartments=["2", "2"])
    with pytest.raises(UnknownNameError, match="series"):
        tissues.load("kidd_stubbs_1983", compartments=["1"])
    with pytest.raises(UnknownNameError, match="nearest: 'buhlmann_1995_"):
        tissues.load("buhlmann_1995")
    with pytest.raises(UnknownNameError, match="b4_formula"):
        tissues.load("buhlmann_1995_a", variant="nonsense")
    ds = tissues.tensions(Exposure.start("air").stay(1), other)
    assert "1b" in ds.compartment.values


# -- Own files --------------------------------------------------------------------------------------


def test_an_own_file_is_a_model_everywhere(tmp_path: Path) -> None:
    path = tmp_path / "own.toml"
    path.write_text(THREE_GASES, encoding="utf-8")
    dive = Exposure.start(gp.Gas(oxygen=0.2, helium=0.3, argon=0.1)).travel(depth=30, minutes=2).stay(20)
    ds = tissues.tensions(dive, path)
    assert ds.inert_gas.values.tolist() == ["N2", "He", "Ar"]
    assert ds.attrs["model"] == "own"
    assert (ds.final > 0.0).all()
    assert tissues.no_stop_time(30.0, "air", path) > 0.0
    # Three gases are weighed as two are: pairwise in any order.
    p, a, b = ds.final.values, tissues.load(path).a, tissues.load(path).b
    total = p.sum(axis=1)
    mean_a, mean_b = (a * p).sum(axis=1) / total, (b * p).sum(axis=1) / total
    np.testing.assert_allclose(ds.ceiling_pressure[-1], ((total - mean_a) * mean_b).max(), rtol=1e-12)


def test_an_own_file_may_change_a_shipped_set(tmp_path: Path) -> None:
    path = tmp_path / "mine.toml"
    path.write_text(
        'based_on = "buhlmann_1995_c"\ntitle = "mine"\n'
        '[compartment.4.N2]\nb = 0.7725\nprovenance = "computed"\n'
    )
    mine, shipped = tissues.load(path), tissues.load("buhlmann_1995_c")
    assert mine.b[3, 0] == 0.7725
    np.testing.assert_array_equal(np.delete(mine.b, 3, 0), np.delete(shipped.b, 3, 0))
    assert mine.digest != shipped.digest


CHANGES = [
    ('kinetics = "exponential"', 'kinetics = "linear"', "kinetics", "exponential"),
    ('unit = "bar"', 'unit = "min"', "unit of pressure", ""),
    ('unit = "bar"', 'unit = "bars"', "bar", ""),
    ("half_time = 3.0", "half_time = -3.0", "compartment.fast.N2.half_time", "not possible"),
    ("half_time = 3.0, ", "", "compartment.fast.N2.half_time", "missing"),
    ("a = 1.3, ", "", "compartment.fast.N2.a", "missing"),
    ("a = 1.3, ", "a = nan, ", "compartment.fast.N2.a", "not possible"),
    ("b = 0.5, ", "b = 0.5, c = 1, ", "compartment.fast.N2", "unknown entry"),
    (
        'provenance = "computed"\n\n[start]',
        'provenance = "sure"\n\n[start]',
        "convention.provenance",
        "memory_low",
    ),
    ('form = "a_b"', 'form = "ab"', "limit.form", "a_b"),
    ('tested = ["before_leaving"]', 'tested = ["sometimes"]', "limit.tested", "on_arrival"),
    ('inert_gases = ["N2", "He", "Ar"]', 'inert_gases = ["N2", "He", "Xe"]', "inert_gases", "Xe"),
    ('inert_gases = ["N2", "He", "Ar"]', 'inert_gases = ["N2", "He"]', "compartment.fast", "Ar"),
    ("[compartment.fast]", "[compartment.fast", "line", ""),
    ('title = "Invented three-gas set"', "titel = 1", "titel", "nearest: 'title'"),
    ('refuses = "hydrogen, neon"\n', "", "refuses", "missing"),
    ('state = "air"', "", "start.state", "missing"),
    ("respiratory_exchange_ratio = 0.9", "respiratory_exchange_ratio = 0.0", "convention", "not possible"),
    ('alveolar = "schreiner"', 'alveolar = "thalmann"', "convention.alveolar", "go together"),
    ("[start]", "[integrity]\ncompartments = 4\n[start]", "integrity.compartments", "3 found"),
    ("[start]", "[integrity]\nsum_a = { N2 = 2.14 }\n[start]", "integrity.sum_a", "mistyped"),
    ("[start]", "[integrity]\nsum_a = { Ne = 2.1 }\n[start]", "integrity.sum_a", "Ne"),
    ('unit = "bar"', "unit = 3", "unit", "wrong kind"),
    ('unit = "bar"', 'unit = "bar"\nair_only = 1', "air_only", "wrong kind"),
    ('unit = "bar"', 'unit = "bar"\ncounted_as = { Ne = "H2" }', "counted_as", "H2"),
    ('unit = "bar"', 'unit = "bar"\nbased_on = "buhlmann"', "based_on", "nearest: 'buhlmann_"),
    ('inert_gases = ["N2", "He", "Ar"]', 'inert_gases = ["total"]', "inert_gases", "go together"),
    ('kinetics = "exponential"', 'kinetics = "serial"', "kinetics", "driven by the ambient pressure"),
    ("respiratory_exchange_ratio = 0.9", "exchange_ratio = 0.9", "exchange_ratio", "respiratory_exchange"),
    ("Ar = { half_time = 4.0, a = 1.2,", "#", "compartment.fast.Ar", "missing"),
    ('b = 0.5, provenance = "computed"', 'b = 0.5, provenance = "known"', "fast.N2.provenance", "memory_low"),
    ("[start]", '[short_deep]\ndepth = "3 bar"\naction = "refuse"\n[start]', "short_deep", "bottom_time"),
]


@pytest.mark.parametrize(
    ("old", "new", "key", "also"), CHANGES, ids=[f"{k}-{n}" for n, (_, _, k, _) in enumerate(CHANGES)]
)
def test_what_is_wrong_in_a_file_is_said(tmp_path: Path, old: str, new: str, key: str, also: str) -> None:
    assert old in THREE_GASES
    path = tmp_path / "wrong.toml"
    path.write_text(THREE_GASES.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(InputFileError, match=re.escape(key)) as caught:
        tissues.load(path)
    assert "wrong.toml" in str(caught.value)
    assert also in str(caught.value)


def test_a_file_that_is_not_there() -> None:
    with pytest.raises(InputFileError, match="nowhere"):
        tissues.load("nowhere.toml")


@pytest.mark.parametrize("name", [n for n in NAMES if "vval18m" not in n])
def test_a_mistyped_digit_is_found(name: str) -> None:
    """One unit added to the last digit of a number of a compartment breaks a sum."""
    text = _shipped()[name]
    begin = text.index("[compartment.")
    end = text.index("[variant.") if "[variant." in text else len(text)
    places = [m for m in re.finditer(r"(?<== )\d+\.\d+", text) if begin < m.start() < end]
    for m in places[:: max(1, len(places) // 6)]:
        decimals = len(m[0].split(".")[1])
        wrong = f"{float(m[0]) + 10.0**-decimals:.{decimals}f}"
        changed = text[: m.start()] + wrong + text[m.end() :]
        with pytest.raises(InputFileError, match="mistyped"):
            _Reader(name, changed, f"{name}.toml", shipped=True).read(None, "")


def test_weaker_provenance_is_refused() -> None:
    air, trimix = Exposure.start("air").stay(1), Exposure.start("trimix 17/48").stay(1)
    with gp.provenance("memory_high"):
        tissues.tensions(air, "buhlmann_1995_a")
        with pytest.raises(gp.errors.ProvenanceError, match="memory_medium"):
            tissues.tensions(trimix, "buhlmann_1995_a")
        with pytest.raises(gp.errors.ProvenanceError, match="thalmann_vval18m"):
            tissues.no_stop_time(18.0, "air", "thalmann_vval18m_reconstructed")
    assert tissues.tensions(air, "buhlmann_1995_a").attrs["provenance"] == "memory_high"
    assert tissues.tensions(trimix, "buhlmann_1995_a").attrs["provenance"] == "memory_medium"


def test_other_files_that_cannot_be_meant(tmp_path: Path) -> None:
    path = tmp_path / "wrong.toml"

    def read_again(text: str) -> None:
        path.write_text(text, encoding="utf-8")
        tissues.load(path)

    head = THREE_GASES[: THREE_GASES.index("[compartment.fast]")]
    with pytest.raises(InputFileError, match="compartment: there is none"):
        read_again(head + "[compartment]\n")
    linear = THREE_GASES.replace('"exponential"', '"exponential_linear"').replace('"schreiner"', '"thalmann"')
    with pytest.raises(InputFileError, match="tracks one gas"):
        read_again(linear)
    ordered = THREE_GASES.replace('unit = "bar"', 'unit = "bar"\nordered = true')
    read_again(ordered)
    with pytest.raises(InputFileError, match="not: half_time rises from fast"):
        read_again(ordered.replace("half_time = 37.0", "half_time = 2.0"))
    # What is shipped must name its source and give its sums.
    for old, new, match in (
        ('source = "made up"', 'source = "nobody"', "unknown source 'nobody'"),
        ('source = "made up"', 'source = "usn_1957"', "integrity: is missing"),
    ):
        with pytest.raises(InputFileError, match=match):
            _Reader("own", THREE_GASES.replace(old, new), "own.toml", shipped=True).read(None, "")


def test_a_set_is_read_once_and_shown() -> None:
    one = tissues.load("workman_1965")
    assert tissues.load(one) is one
    assert repr(one) == "<TissueSet workman_1965: 9 compartments, N2, He>"
    with pytest.raises(UnknownNameError, match="give its name"):
        tissues.load(one, compartments=["5"])
    with pytest.raises(UnknownNameError, match="give its name"):
        tissues.load(one, variant="exchange_ratio_0_9")


def test_a_set_without_limits_holds_tensions_only(tmp_path: Path) -> None:
    """Uptake can be followed; nothing that needs a limit is answered."""
    path = tmp_path / "no_limits.toml"
    plain = re.sub(r", a = [\d.]+, b = [\d.]+", "", THREE_GASES)
    path.write_text(plain.replace('form = "a_b"\ntested = ["before_leaving"]', ""), encoding="utf-8")
    dive = Exposure.start("air").travel(depth=30, minutes=2).stay(20)
    ds = tissues.tensions(dive, path)
    assert np.isfinite(ds.tissue_pressure).all()
    assert np.isnan(ds.ceiling_pressure).all()
    assert set(ds.controlling_compartment.values) == {""}
    for ask in (
        lambda: tissues.no_stop_time(30.0, "air", path),
        lambda: tissues.time_to_fly(dive, path, altitude=2400.0),
        lambda: gp.ascent.plan(dive, model=path),
    ):
        with pytest.raises(ValidityError, match="no limit"):
            ask()
