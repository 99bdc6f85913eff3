"""Which phase of what a channel carries, by its name: a table of habits, and names that must not be taken."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records.channels import AnalogChannel
from analyzer.terminals.names import phase_order, role_of


def channel(name: str, unit: str = "A", phase: str = "", **more: object) -> AnalogChannel:
    return AnalogChannel(number=0, id=name, name=name, unit=unit, phase=phase, **more)  # type: ignore[arg-type]


# Three names of one set, their unit, the three phases that must come out and what is common to the names.
HABITS = [
    ("IA IB IC", "A", "abc", ""),
    ("ia ib ic", "A", "abc", ""),
    ("I_A I_B I_C", "A", "abc", ""),
    ("I-A I-B I-C", "A", "abc", ""),
    ("I.A I.B I.C", "A", "abc", ""),
    ("I_L1 I_L2 I_L3", "A", "123", ""),
    ("IL1 IL2 IL3", "kA", "123", ""),
    ("I-L1 I-L2 I-L3", "A", "123", ""),
    ("I.L1 I.L2 I.L3", "A", "123", ""),
    ("I1 I2 I3", "A", "123", ""),
    ("I_1 I_2 I_3", "A", "123", ""),
    ("IR IS IT", "A", "rst", ""),
    ("IR IY IB", "A", "ryb", ""),
    ("I_R I_Y I_B", "kA", "ryb", ""),
    ("ILA ILB ILC", "A", "abc", ""),
    ("Ia(kA)|Ib(kA)|Ic(kA)", "kA", "abc", ""),
    ("Ia (kA)|Ib (kA)|Ic (kA)", "kA", "abc", ""),
    ("IA [A]|IB [A]|IC [A]", "A", "abc", "a"),
    ("I(A)|I(B)|I(C)", "A", "abc", ""),
    ("I (L1)|I (L2)|I (L3)", "A", "123", ""),
    ("U[L1] U[L2] U[L3]", "kV", "123", ""),
    ("VA VB VC", "kV", "abc", ""),
    ("Va Vb Vc", "V", "abc", ""),
    ("VR VY VB", "kV", "ryb", ""),
    ("VR VS VT", "kV", "rst", ""),
    ("V1 V2 V3", "V", "123", ""),
    ("VL1 VL2 VL3", "V", "123", ""),
    ("UA UB UC", "V", "abc", ""),
    ("U_L1 U_L2 U_L3", "kV", "123", ""),
    ("UL1 UL2 UL3", "kV", "123", ""),
    ("ULA ULB ULC", "kV", "abc", ""),
    ("U1 U2 U3", "V", "123", ""),
    ("UR US UT", "V", "rst", ""),
    ("EA EB EC", "V", "abc", ""),
    ("VAN VBN VCN", "V", "abc", ""),
    ("Van Vbn Vcn", "kV", "abc", ""),
    ("VAG VBG VCG", "kV", "abc", ""),
    ("Va-g Vb-g Vc-g", "kV", "abc", ""),
    ("VA-N VB-N VC-N", "kV", "abc", ""),
    ("UL1-N UL2-N UL3-N", "V", "123", ""),
    ("V1N V2N V3N", "V", "123", ""),
    ("VRN VYN VBN", "kV", "ryb", ""),
    # Feeders and bays before, behind and around
    ("Feeder 3 IA|Feeder 3 IB|Feeder 3 IC", "A", "abc", "feeder 3"),
    ("IA Feeder 3|IB Feeder 3|IC Feeder 3", "A", "abc", "feeder 3"),
    ("F07_IL1 F07_IL2 F07_IL3", "A", "123", "f07"),
    ("IL1_F07 IL2_F07 IL3_F07", "A", "123", "f07"),
    ("BAY-12:IA BAY-12:IB BAY-12:IC", "A", "abc", "bay 12:"),
    ("=E04/IL1 =E04/IL2 =E04/IL3", "A", "123", "=e04/"),
    ("110kV Bus I VA|110kV Bus I VB|110kV Bus I VC", "kV", "abc", "110kv bus i"),
    ("HV IR|HV IS|HV IT", "A", "rst", "hv"),
    ("IA HV|IB HV|IC HV", "A", "abc", "hv"),
    ("T1.HV.IA T1.HV.IB T1.HV.IC", "A", "abc", "t1.hv."),
    ("IA1 IB1 IC1", "A", "abc", "1"),
    ("Ia2 Ib2 Ic2", "A", "abc", "2"),
    ("VA12 VB12 VC12", "kV", "abc", "12"),
    ("1-Ia 2-Ib 3-Ic", "A", "abc", None),
    ("F1-IA F2-IB F3-IC", "A", "abc", None),
    ("Ch 5: UA|Ch 6: UB|Ch 7: UC", "V", "abc", None),
    ("VT1 UA|VT1 UB|VT1 UC", "kV", "abc", "vt1"),
    ("VT VA|VT VB|VT VC", "kV", "abc", "vt"),
    ("CT1 IA|CT1 IB|CT1 IC", "A", "abc", "ct1"),
    ("Line Sum ILA|Line Sum ILB|Line Sum ILC", "A", "abc", "line sum"),
    ("Elm Farms IA|Elm Farms IB|Elm Farms IC", "A", "abc", "elm farms"),
    ("Aux Transf IA|Aux Transf IB|Aux Transf IC", "A", "abc", "aux transf"),
    # Words in place of the quantity's letter
    ("Phase A Current|Phase B Current|Phase C Current", "A", "abc", "current"),
    ("Current Phase A|Current Phase B|Current Phase C", "A", "abc", "current"),
    ("A Phase Current|B Phase Current|C Phase Current", "A", "abc", "current"),
    ("A-phase volts|B-phase volts|C-phase volts", "V", "abc", "volts"),
    ("Current Ph. A|Current Ph. B|Current Ph. C", "A", "abc", "current"),
    ("Corriente Fase R|Corriente Fase S|Corriente Fase T", "A", "rst", "corriente"),
    ("Courant phase 1|Courant phase 2|Courant phase 3", "A", "123", "courant"),
    ("Strom L1|Strom L2|Strom L3", "A", "123", "strom"),
    ("L1 Spannung|L2 Spannung|L3 Spannung", "V", "123", "spannung"),
    ("A.phsA A.phsB A.phsC", "A", "abc", "a."),
    ("PhV.phsA PhV.phsB PhV.phsC", "V", "abc", "phv."),
    # Cyrillic letters that look Latin, and Cyrillic words
    ("Iа Iв Iс", "A", "abc", ""),
    ("Uа_1СШ Uв_1СШ Uс_1СШ", "кВ", "abc", "1сш"),
    ("Ia_2СШ-110_ВЛ7 Ib_2СШ-110_ВЛ7 Ic_2СШ-110_ВЛ7", "А", "abc", "2сш 110 вл7"),
    ("Ток ф.А|Ток ф.В|Ток ф.С", "А", "abc", "ток"),
    ("Ток фаза А|Ток фаза В|Ток фаза С", "А", "abc", "ток"),
    ("Напряжение фазы A|Напряжение фазы B|Напряжение фазы C", "кВ", "abc", "напряжение"),
    ("IфA IфB IфC", "А", "abc", ""),
    # Chinese
    ("Ia对侧 Ib对侧 Ic对侧", "A", "abc", "对侧"),
    ("220kV母线_Ua 220kV母线_Ub 220kV母线_Uc", "V", "abc", "220kv母线"),
    ("电压3 Ua|电压3 Ub|电压3 Uc", "V", "abc", "电压3"),
    ("A相电流 B相电流 C相电流", "A", "abc", "电流"),
    ("1号主变_高压侧_Ia 1号主变_高压侧_Ib 1号主变_高压侧_Ic", "A", "abc", "1号主变 高压侧"),
]


@pytest.mark.parametrize(("names", "unit", "phases", "group"), HABITS, ids=[habit[0] for habit in HABITS])
def test_three_phases_of_a_habit_come_out_and_belong_together(names, unit, phases, group):
    roles = [role_of(channel(name, unit)) for name in (names.split("|") if "|" in names else names.split())]
    assert all(role is not None for role in roles)
    assert "".join(role.phase for role in roles) == phases
    assert phase_order({role.phase for role in roles}) == tuple(phases)
    if group is None:  # numbers that count channels are for the assignment to see through
        assert len({role.group for role in roles}) == 3
    elif group == "a":  # the unit's letter in brackets stays in the name, alike for all three
        assert len({role.group for role in roles}) == 1
    else:
        assert {role.group for role in roles} == {group}
    expected = "voltage" if unit.lower().endswith(("v", "в")) else "current"
    assert {role.kind for role in roles} == {expected}


def test_the_table_of_habits_is_as_long_as_it_should_be():
    assert len({habit[0] for habit in HABITS}) >= 80


RESIDUALS = [
    *["IN", "In", "I_N", "I0", "3I0", "3 I0", "3xI0", "3×I0", "3Io", "Io", "IE", "IG", "I-E"],
    *["Feeder 3 IN", "Feeder 3 3I0", "IN Feeder 3", "4-3I0", "IN1", "3I0对侧", "LINE SUM IN"],
]


@pytest.mark.parametrize("name", RESIDUALS)
def test_residual_currents_are_known_as_such(name):
    assert role_of(channel(name)).phase == "n"


@pytest.mark.parametrize("name", ["UN", "VN", "3U0", "3V0", "3Uo", "U0", "Uo", "UE", "VG", "J2 Vn"])
def test_residual_voltages_are_known_as_such(name):
    assert role_of(channel(name, "V")).phase == "n"


def test_a_residual_belongs_to_its_phases():
    for names in ("IA_F1 3I0_F1", "Ia_ВЛ1 3Io_ВЛ1", "HV-IA HV-IN", "1-Ia 1-3I0"):
        phase, residual = (role_of(channel(name)) for name in names.split())
        assert phase.group == residual.group


PAIRS = [
    *[("UL12", "12"), ("U12", "12"), ("U_L12", "12"), ("UL1L2", "12"), ("UL1-L2", "12"), ("UL1-UL2", "12")],
    *[("U21", "21"), ("U 31", "31"), ("VAB", "ab"), ("Vab", "ab"), ("VA-B", "ab"), ("Va-b", "ab")],
    *[("VA-VB", "ab"), ("VCA", "ca"), ("V_BC", "bc"), ("URS", "rs"), ("VRY", "ry"), ("V_YB", "yb")],
    *[("Bus 1 UL23", "23"), ("UBC_T1", "bc"), ("Uав", "ab"), ("Ubc母线", "bc"), ("EAB", "ab")],
]


@pytest.mark.parametrize(("name", "phases"), PAIRS)
def test_voltages_between_phases_are_not_taken_for_a_phase(name, phases):
    assert role_of(channel(name, "kV")).phase == phases


@pytest.mark.parametrize("name", ["IA-IB", "IAB", "I_BC", "IL1-IL2", "I12", "IRS"])
def test_a_difference_of_currents_is_no_phase_current(name):
    assert role_of(channel(name)) is None


NOT_PHASES = [
    *[("IARMS", "A"), ("IA RMS", "A"), ("Ia rms", "A"), ("RMS IA", "A"), ("VA_RMS", "kV"), ("IA (RMS)", "A")],
    *[("IA Mag", "A"), ("I1 MAG", "A"), ("V1 Mag", "kV"), ("IAMAG", "A"), ("IA magnitude", "A")],
    *[("IA Angle", "A"), ("VA Ang", "V"), ("IA mean", "A"), ("Ia avg", "A"), ("IA max", "A")],
    *[("IA min", "A"), ("IA demand", "A"), ("IA fund", "A"), ("IA fundamental", "A"), ("IA THD", "A")],
    *[("IA harm5", "A"), ("IDIFF", "A"), ("I DIFF LA", "A"), ("IDIFF_A", "A"), ("Idiff L1", "A")],
    *[("IBIAS", "A"), ("I BIAS", "A"), ("IA restraint", "A"), ("REF IN", "A"), ("IAREF", "A")],
    *[("IDC", "A"), ("I DC", "A"), ("VDC", "V"), ("VDC_G1", "V"), ("UDC", "V"), ("UA_DC", "V")],
    *[("IALARM", "A"), ("ITRIP", "A"), ("UAUX", "V"), ("ICT", "A"), ("INPUT 1", "V")],
    *[("ISUM", "A"), ("I4", "A"), ("U4", "V"), ("VX", "V"), ("Ux", "V"), ("V1MEM", "kV"), ("VMEM", "V")],
    *[("I1 pos seq", "A"), ("V2 neg", "V"), ("I2 NPS", "A"), ("V1 PPS", "V"), ("I pos A", "A")],
    *[("Trip coil V1", "V"), ("Contact U1", "V"), ("Battery U1", "V"), ("CB aux contact", "V")],
    *[("Excitation", "V"), ("Line", "A"), ("alpha", "A"), ("beta", "A"), ("BIAS", "A"), ("", "A")],
    *[("VIA", "V"), ("DELTA", "V"), ("Elsa", "A"), ("CIA", "A"), ("Media", "A"), ("Sub", "V"), ("Eve", "V")],
]  # fmt: skip


@pytest.mark.parametrize(("name", "unit"), NOT_PHASES, ids=[" ".join(pair) for pair in NOT_PHASES])
def test_what_is_no_instantaneous_phase_quantity_is_left_out(name, unit):
    assert role_of(channel(name, unit)) is None


@pytest.mark.parametrize(
    ("name", "unit"),
    [("FREQ", "Hz"), ("FA", "Hz"), ("IA", "deg"), ("IA", "°"), ("PA", "MW"), ("IA", "%"), ("VA", "pu")],
)
def test_only_volts_and_amperes_count(name, unit):
    assert role_of(channel(name, unit)) is None


@pytest.mark.parametrize(("name", "unit"), [("IA", "V"), ("VA", "A"), ("UL1", "kA")])
def test_a_letter_that_contradicts_the_unit_is_not_believed(name, unit):
    assert role_of(channel(name, unit)) is None


def test_a_channel_without_usable_values_is_left_out():
    assert role_of(channel("IA", "furlong")) is None
    assert role_of(channel("IA", multiplier=0.0)) is None
    assert role_of(channel("IA", side="secondary")) is None  # secondary, and no ratio to bring it up
    assert role_of(channel("IA", side="secondary", primary=600.0, secondary=5.0)) is not None


MARKS = [
    *[("A", "a"), ("b", "b"), ("C", "c"), ("R", "r"), ("Y", "y"), ("L1", "1"), ("l3", "3"), ("2", "2")],
    *[("A-N", "a"), ("BN", "b"), ("L1-N", "1"), ("Phase A", "a"), ("В", "b"), ("С", "c"), ("C相", "c")],
    *[("N", "n"), ("G", "n"), ("E", "n"), ("0", "n"), (" A ", "a")],
]


@pytest.mark.parametrize(("mark", "phase"), MARKS)
def test_where_the_name_says_nothing_the_phase_mark_does(mark, phase):
    role = role_of(channel("Line current", phase=mark))
    assert (role.phase, role.group) == (phase, "line current")


@pytest.mark.parametrize("mark", ["", "_", "X", "AB", "A-B", "L12", "AC", "7", "AA"])
def test_a_mark_of_no_single_phase_says_nothing(mark):
    assert role_of(channel("Line current", phase=mark)) is None


def test_the_letter_of_the_mark_leaves_the_name():
    for names in ("NORTH A I-BRANCH|NORTH B I-BRANCH", "FAULTA|FAULTB", "Ток А|Ток В", "amps a|amps b"):
        roles = [
            role_of(channel(name, phase=mark)) for name, mark in zip(names.split("|"), "AB", strict=True)
        ]
        assert [role.phase for role in roles] == ["a", "b"]
        assert len({role.group for role in roles}) == 1


def test_a_mark_decides_where_a_name_has_two_readings():
    assert role_of(channel("Bus U1 VB", "kV", phase="B")).phase == "b"
    assert role_of(channel("Bus U1 VB", "kV", phase="L1")).phase == "1"
    assert role_of(channel("Line L1 current", phase="C")).phase == "c"
    assert role_of(channel("IA", phase="B")).phase == "a"  # a name that is plain stands


def test_sets_of_phases_in_their_order():
    assert phase_order(set("abcn")) == ("a", "b", "c")
    assert phase_order(set("tsr")) == ("r", "s", "t")
    assert phase_order(set("ryb")) == ("r", "y", "b")
    assert phase_order(set("123")) == ("1", "2", "3")
    for incomplete in ("ab", "a2c", "rs", "12", "", "n"):
        assert phase_order(set(incomplete)) is None


@settings(deadline=None, derandomize=True, max_examples=200)
@given(name=st.text(max_size=30), mark=st.text(max_size=4), unit=st.sampled_from(["A", "kV"]))
def test_any_text_is_a_role_or_none(name, mark, unit):
    role = role_of(channel(name, unit, mark))
    assert role is None or (role.phase in {*"abcrsty123n"} or (len(role.phase) == 2 and unit == "kV"))


@settings(deadline=None, derandomize=True, max_examples=100)
@given(
    bay=st.from_regex(r"\A[QWXZ][0-9]{1,3}\Z"),
    habit=st.sampled_from(["I{p}", "I_{p}", "I-{p}", "IL{p}", "I_L{p}"]),
    order=st.sampled_from(["abc", "rst", "123"]),
    joint=st.sampled_from([" ", "_", "-", ":", "/"]),
    behind=st.booleans(),
)
def test_a_bay_before_or_behind_changes_no_phase(bay, habit, order, joint, behind):
    roles = []
    for phase in order:
        name = habit.format(p=phase.upper())
        roles.append(role_of(channel(f"{name}{joint}{bay}" if behind else f"{bay}{joint}{name}")))
    assert "".join(role.phase for role in roles) == order
    assert len({role.group for role in roles}) == 1
