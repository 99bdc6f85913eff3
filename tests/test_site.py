"""The site file: what it may say, and that whatever is wrong in it is one error with key and line."""

from __future__ import annotations

import cmath
import math
import pickle

import pytest

from analyzer.errors import FaultassayError
from analyzer.site import Site, SiteError, SiteTerminal, read_site

FULL = """\
[site]
name = "Invented 20 kV"
nominal_voltage_v = 20000
nominal_frequency_hz = 50

[clock]
utc_offset_h = 5.5
stated_error_s = 0.001

[[terminal]]
name = "Feeder 4"
polarity = "into-bus"
residual = "IN"
currents = { a = "IA", b = ["IB1", "-IB2"], c = "IC" }
voltages_pp = { ab = "VAB", bc = "VBC" }
anti_alias_delay_s = 0.0001
ratio_correction = { IA = 1.2 }

[terminal.unit]
"IB 1" = "kA"

[terminal.source]
z1_ohm = [0.4, 4.0]
z0_ohm = [0, 5]
tolerance_percent = 15

[terminal.line]
length_km = 9
z1_ohm_per_km = [0.3061, 0.6270]
z0_ohm_per_km = [0.7735, 1.9373]

[terminal.ct]
accuracy_class = "5P20"
primary_a = 600
secondary_a = 5
secondary_time_constant_s = 3
knee_point_v = 300
burden_ohm = 1.2
winding_ohm = 0.8
rated_burden_va = 30

[terminal.vt]
accuracy_class = "3P"
primary_v = 20000
secondary_v = 100

[terminal.breaker]
rated_breaking_current_a = 25e3
rated_making_current_a = 63e3
dc_component_percent = 30
dc_time_constant_s = 0.045
opening_time_s = 0.035
break_time_s = 0.05

[[terminal]]
currents = { a = "I4", b = "I5", c = "I6" }
"""


@pytest.fixture
def read(tmp_path):
    def read_it(text: str) -> Site:
        path = tmp_path / "site.toml"
        path.write_text(text, encoding="utf-8")
        return read_site(path)

    return read_it


def test_everything_that_can_be_said_is_read(read):
    site = read(FULL)
    first, second = site.terminal
    assert site.site.nominal_frequency_hz == 50.0
    assert first.currents is not None
    assert first.currents.b == ("IB1", "-IB2")
    assert first.source.z1_ohm == (0.4, 4.0)
    assert first.unit == {"IB 1": "kA"}
    assert second.source.tolerance_percent == 10.0
    assert second.breaker.opening_time_s is None
    # Line data of dss-extensions/electricdss-tst, ReverseTD21RelayTest.DSS; k0 of them by numpy.
    assert abs(first.line.k0) == pytest.approx(0.664616928, rel=1e-9)
    assert math.degrees(cmath.phase(first.line.k0)) == pytest.approx(6.389589303, abs=1e-6)
    assert second.line.k0 is None
    for model, text in ((site.site, "nominal_voltage_v"), (first.breaker, "break_time_s")):
        assert model.model_dump()[text] is not None
    assert pickle.loads(pickle.dumps(site)).where("terminal", 1) == site.where("terminal", 1)


def test_every_key_is_used_in_the_full_file(read):
    """So that the test above speaks of all keys; a new one is to be added there."""

    def unset(model) -> set[str]:
        inner = [getattr(model, name) for name in type(model).model_fields]
        missing = {name for name in type(model).model_fields if name not in model.model_fields_set}
        for value in inner:
            if hasattr(value, "model_fields_set"):
                missing |= unset(value)
        return missing

    site = read(FULL)
    # A second way to say the same, the third voltage that follows from two, and what `currents` test above.
    assert unset(site.site) | unset(site.clock) | unset(site.terminal[0]) == {"voltages", "ca"}


def test_nothing_is_needed(read):
    for text in ("", "[site]\n", "[[terminal]]\n", "[[terminal]]\n[terminal.source]\n[terminal.ct]\n"):
        assert read(text).site.name is None


# File, line of the key that is wrong, key, and what of the message must be there.
WRONG = [
    ("[site]\nnominal_frequency_hz = '50'", 2, "site.nominal_frequency_hz", "must be a number, got '50'"),
    ("[site]\nnominal_frequency_hz = 5000", 2, "site.nominal_frequency_hz", "must be at most 100"),
    ("[site]\nnominal_frequency_hz = true", 2, "site.nominal_frequency_hz", "must be a number, got true"),
    ("[site]\nnominal_voltage_v = -20000", 2, "site.nominal_voltage_v", "greater than 0, got -20000"),
    ("[site]\nnominal_voltage_v = inf", 2, "site.nominal_voltage_v", "finite"),
    (f"[site]\nnominal_voltage_v = {'9' * 400}", 2, "site.nominal_voltage_v", "must be a number"),
    ("[site]\nname = ''", 2, "site.name", "must not be empty"),
    ("[site]\nnominal_volts = 3", 2, "site.nominal_volts", "did you mean nominal_voltage_v?"),
    ("[site]\nwhatever = 3", 2, "site.whatever", "known here are: name, nominal_voltage_v"),
    ("\n[sites]\nname = 'a'", 2, "sites", "did you mean site?"),
    ("site = 3", 1, "site", "must be a table"),
    ("[[site]]\nname = 'a'", 1, "site", "single brackets"),
    ("[terminal]\nname = 'a'", 1, "terminal", "double brackets"),
    ("[clock]\nutc_offset_h = 15", 2, "clock.utc_offset_h", "at most 14"),
    ("[[terminal]]\npolarity = 'out'", 2, "terminal[0].polarity", "'out-of-bus' or 'into-bus', got 'out'"),
    ("[[terminal]]\ncurrents = {a='I1',b='I2',c=3}", 2, "terminal[0].currents.c", "channel's name"),
    ("[[terminal]]\ncurrents = {a='I1',b='I2',c=[]}", 2, "terminal[0].currents.c", "channel's name"),
    ("[[terminal]]\ncurrents = {a=['I1','I1'],b='I2',c='I3'}", 2, "terminal[0].currents.a", "twice"),
    ("[[terminal]]\ncurrents = {a='I1',b='I2',c='I1'}", 2, "terminal[0].currents", "a and c are the same"),
    ("[[terminal]]\ncurrents = {a='I1',c='I3'}", 2, "terminal[0].currents", "b is absent"),
    ("[[terminal]]\nresidual='IN'\ncurrents = {a='I1'}", 3, "terminal[0].currents", "b and c are absent"),
    ("[[terminal]]\ncurrents = {a='I1',d='I3'}", 2, "terminal[0].currents.d", "known here are: a, b, c"),
    ("[[terminal]]\nvoltages = {a='U1',b='U2'}", 2, "terminal[0].voltages", "needs a, b and c"),
    ("[[terminal]]\nvoltages_pp = {ab='U1'}", 2, "terminal[0].voltages_pp", "needs two"),
    ("[[terminal]]\nvoltages_pp = {ab='U1',bc='U1'}", 2, "terminal[0].voltages_pp", "same channel"),
    (
        "[[terminal]]\nvoltages_pp = {ab='U1',bc='U2'}\nvoltages = {a='V1',b='V2',c='V3'}",
        2, "terminal[0].voltages_pp", "only one of them",
    ),
    ("[[terminal]]\n[terminal.unit]\n'I.A' = 'furlong'", 3, 'terminal[0].unit."I.A"', "unit of voltage"),
    ("[[terminal]]\n[terminal.unit]\nIA = 'Hz'", 3, "terminal[0].unit.IA", "unit of voltage"),
    ("[[terminal]]\nratio_correction = {IA = 0}", 2, "terminal[0].ratio_correction.IA", "greater than 0"),
    ("[[terminal]]\nanti_alias_delay_s = -1e-4", 2, "terminal[0].anti_alias_delay_s", "at least 0"),
    ("[[terminal]]\nsource.tolerance_percent = -5", 2, "terminal[0].source.tolerance_percent", "than 0"),
    ("[[terminal]]\n[terminal.source]\nz1_ohm = 4", 3, "terminal[0].source.z1_ohm", "[r, x]"),
    ("[[terminal]]\n[terminal.source]\nz1_ohm = [1, 2, 3]", 3, "terminal[0].source.z1_ohm", "[r, x]"),
    ("[[terminal]]\n[terminal.source]\nz1_ohm = [-1, 2]", 3, "terminal[0].source.z1_ohm[0]", "at least 0"),
    ("[[terminal]]\n[terminal.line]\nz0_ohm_per_km=[1, 0]", 3, "terminal[0].line.z0_ohm_per_km[1]", "than 0"),
    ("[[terminal]]\n[terminal.ct]\naccuracy_class = '7P'", 3, "terminal[0].ct.accuracy_class", "5P20"),
    ("[[terminal]]\n[terminal.ct]\naccuracy_class = 0.5", 3, "terminal[0].ct.accuracy_class", "quotation"),
    ("[[terminal]]\n[terminal.ct]\nprimary_a = 600", 2, "terminal[0].ct", "both"),
    ("[[terminal]]\n[terminal.vt]\naccuracy_class = '5P'", 3, "terminal[0].vt.accuracy_class", "3P"),
    (
        "[[terminal]]\n[terminal.breaker]\nopening_time_s = 0.05\nbreak_time_s = 0.04",
        2, "terminal[0].breaker", "cannot be shorter",
    ),
    ("[[terminal]]\n[[terminal]]\nname = 'b'", 1, "terminal", "needs its currents"),
    # Of several, the uppermost.
    ("[clock]\nstated_error_s = 0\n[site]\nname = 3\n", 2, "clock.stated_error_s", "greater than 0"),
    # In the second terminal, and not in the first, which has the same key.
    (
        "[[terminal]]\nname='a'\ncurrents={a='1',b='2',c='3'}\n[terminal.ct]\nburden_ohm = 1\n"
        "[[terminal]]\ncurrents={a='4',b='5',c='6'}\n[terminal.ct]\nburden_ohm = -1\n",
        9, "terminal[1].ct.burden_ohm", "at least 0",
    ),
]  # fmt: skip


@pytest.mark.parametrize(("text", "line", "key", "said"), WRONG)
def test_what_is_wrong_is_one_error_with_its_key_and_line(read, text, line, key, said):
    with pytest.raises(SiteError) as caught:
        read(text)
    error = caught.value
    assert error.code == "bad-site"
    assert error.where.endswith(f"site.toml, line {line}: {key}")
    assert said in f"{error.message} ({error.hint})"
    assert "\n" not in str(error)
    assert len(str(error).replace(error.where, "")) < 300


def test_what_is_no_toml_has_its_line(read):
    with pytest.raises(SiteError) as caught:
        read("[site]\nname = Riverbend\n")
    assert caught.value.code == "bad-toml"
    assert caught.value.where.endswith("site.toml, line 2")


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(SiteError, match="cannot be read"):
        read_site(tmp_path / "gone.toml")


def test_errors_cross_processes(read):
    with pytest.raises(SiteError) as caught:
        read("[site]\nx = 1")
    again = pickle.loads(pickle.dumps(caught.value))
    assert isinstance(again, FaultassayError)
    assert (type(again), str(again), again.location) == (SiteError, str(caught.value), ())


def test_what_is_said_otherwise_goes_before():
    site = Site.model_validate(
        {"site": {"nominal_frequency_hz": 50}, "terminal": [{"unit": {"IA": "kA", "IB": "kA"}}]}
    )
    after = site.after(nominal_frequency_hz=60.0, units={"IA": "A"})
    assert after.site.nominal_frequency_hz == 60.0
    assert after.terminal[0].unit == {"IB": "kA"}
    assert site.after(nominal_frequency_hz=None, units={}) == site


def test_every_key_is_described():
    models, seen = [Site], []
    while models:
        model = models.pop()
        for name, field in model.model_fields.items():
            inner = field.annotation
            if isinstance(inner, type) and hasattr(inner, "model_fields"):
                assert inner.__doc__
                models.append(inner)
            elif name != "terminal":
                assert field.description, f"{model.__name__}.{name}"
                seen.append(name)
        if model is Site:
            models.append(SiteTerminal)
    assert len(seen) > 30


def test_no_units_are_left_to_guess():
    """A number has its unit in its name; the exceptions are pure numbers."""
    endings = ("_v", "_a", "_hz", "_s", "_h", "_ohm", "_km", "_va", "_percent", "_ohm_per_km")
    numbers = [
        "nominal_voltage_v", *SiteTerminal.model_fields["breaker"].annotation.model_fields,
        *(n for n in SiteTerminal.model_fields["ct"].annotation.model_fields if n != "accuracy_class"),
        *SiteTerminal.model_fields["source"].annotation.model_fields,
        *SiteTerminal.model_fields["line"].annotation.model_fields,
    ]  # fmt: skip
    assert all(name.endswith(endings) for name in numbers)
