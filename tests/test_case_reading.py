"""Case files: what is read, what is refused, and with which words."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import harvest
from harvest.errors import CaseError, InputError
from harvest.model.case import DECLARATIONS, Case, assumptions, case_hash, explain, fields, value_at
from harvest.model.case_fields import Curve
from harvest.model.case_rules import broken_rules
from harvest.model.case_text import key_lines
from harvest.model.reading import case_from, load_case, read_case, replace
from harvest.quantities import ENERGY_PRICE, KINDS, STANDARD_VOLUME_FLOW, StandardVolumeFlow

PLAIN = """\
title = "invented"

[hot]
fluid = "water"
inlet_temperature = "90 degC"
mass_flow = "0.5 kg/s"
pressure = "1.5 bar gauge"

[hot.duct]
gap = "3 mm"

[cold]
fluid = "water"
inlet_temperature = "20 degC"
volume_flow = "30 L/min"
duct.gap = "3 mm"

[stack]
layers = 2
rows = 12
columns = 4
row_pitch = "44 mm"
column_pitch = "44 mm"

[module]
footprint = ["40 mm", "40 mm"]
seebeck = "0.05 V/K"
resistance = ["2 ohm", "10 mohm/K"]
conductance = [["300 K", "0.6 W/K"], ["400 K", "0.65 W/K"]]

[electrical]
row_blocks = [4, 4, 4]
"""


def changed(*pairs: tuple[str, str]) -> str:
    text = PLAIN
    for old, new in pairs:
        assert old in text
        text = text.replace(old, new, 1)
    return text


def faults(text: str, *overrides: str) -> tuple[str, ...]:
    with pytest.raises(CaseError) as caught:
        read_case(text, overrides, label="case.toml")
    assert all("\n" not in fault for fault in caught.value.faults)
    return caught.value.faults


def line_of(text: str, part: str) -> int:
    return next(number for number, line in enumerate(text.splitlines(), 1) if part in line)


def test_values_are_si_under_the_names_of_the_file() -> None:
    case = read_case(PLAIN)
    assert case.hot.inlet_temperature == pytest.approx(363.15)
    assert case.hot.pressure == pytest.approx(251325.0)
    assert case.cold.pressure == 101325.0
    assert case.cold.volume_flow == pytest.approx(5e-4)
    assert case.hot.volume_flow is None and case.hot.duct.faces == 1
    assert case.module.footprint == (0.04, 0.04)
    assert case.module.seebeck == Curve("polynomial", (0.05,))
    assert case.module.resistance == Curve("polynomial", (2.0, 0.01))
    assert case.module.conductance == Curve("table", (0.6, 0.65), (300.0, 400.0))
    assert case.electrical.row_blocks == (4, 4, 4)
    assert case.module.legs is None and case.size is None
    assert case.given["hot"]["mass_flow"] == "0.5 kg/s"


BAD: list[tuple[str, str, str]] = [
    # what stands in the file, what is written instead, the fault after "case.toml:LINE: "
    ('mass_flow = "0.5 kg/s"', "mass_flow = 0.5", 'hot.mass_flow: 0.5 has no unit; write for example "0.5 kg/s"'),
    ('mass_flow = "0.5 kg/s"', 'mass_flow = "0.5 kW"', "is in a unit of power, not of mass flow; use kg/s"),
    ('mass_flow = "0.5 kg/s"', 'mass_flow = "0,5 kg/s"', "write 1.5, not 1,5"),
    ('mass_flow = "0.5 kg/s"', 'mass_flow = "-0.5 kg/s"', 'hot.mass_flow: "-0.5 kg/s" is not possible; give above 0'),
    ('mass_flow = "0.5 kg/s"', 'mass_flow = "0 kg/s"', "give above 0"),
    ('mass_flow = "0.5 kg/s"', "mass_flow = nan", "nan is not a finite number"),
    ('mass_flow = "0.5 kg/s"', "mass_flow = 2026-01-01", "a date is not a number with a unit"),
    ('mass_flow = "0.5 kg/s"', "mass_flw = 1", "hot.mass_flw: unknown field; did you mean mass_flow?"),
    ('"90 degC"', '"90 C"', "write degC"),
    ('"90 degC"', '"-300 degC"', "hot.inlet_temperature:"),
    ('fluid = "water"', 'fluid = "watr"', "did you mean water?; known are water, ethylene glycol"),
    ('pressure = "1.5 bar gauge"', "volume_fraction = 0.5", 'does not apply to hot.fluid = "water", only to ethylene'),
    ('pressure = "1.5 bar gauge"', "swept_volume_flow = 1", 'does not apply to hot.drive = "free", only to engine'),
    ('pressure = "1.5 bar gauge"', 'volume_flow = "1 L/s"', "hot.volume_flow: is a second flow beside hot.mass_flow"),
    ('gap = "3 mm"', 'gap = "3 mm"\nfin_pitch = "2 mm"', 'does not apply to hot.duct.kind = "smooth"'),
    ('gap = "3 mm"', 'gap = "3 mm"\nkind = "heat pipe"', "known are smooth, plain fins, offset strip fins"),
    ('gap = "3 mm"', 'gap = "3 mm"\nfaces = 3', "hot.duct.faces: 3 is not possible; give at least 1 and at most 2"),
    ('row_pitch = "44 mm"', 'row_pitch = "38 mm"', "less than the module's footprint of 40.00 mm along the flow"),
    ('column_pitch = "44 mm"', 'column_pitch = "38 mm"', "footprint of 40.00 mm across the flow"),
    ("rows = 12", "rows = 12.5", "12.5 is not a whole number"),
    ("rows = 12", "rows = true", "true is not a whole number"),
    (
        "rows = 12",
        "rows = 1000000000000",
        "stack.rows: 1000000000000 is not possible; give at least 1 and at most 10000",
    ),
    ("rows = 12", "rows = 0", "give at least 1"),
    ("[4, 4, 4]", "[4, 4]", "electrical.row_blocks: adds up to 8 rows, and the stack has 12"),
    ("[4, 4, 4]", "[]", "is not a list of whole numbers"),
    ("row_blocks = [4, 4, 4]", "strings_across = 3", "3 does not divide the 4 columns"),
    ("row_blocks = [4, 4, 4]", "layers_in_series = 3", "3 does not divide the 2 layers"),
    ("row_blocks = [4, 4, 4]", 'independent = "yes"', "is not true or false"),
    ("row_blocks = [4, 4, 4]", "converter_efficiency = 1.5", "1.5 is not possible; give above 0 and at most 1"),
    ("row_blocks = [4, 4, 4]", 'converter_window = ["60 V", "18 V"]', "60 V is not below 18 V"),
    ("row_blocks = [4, 4, 4]", 'converter_window = "18 V"', "is not a pair"),
    ("row_blocks = [4, 4, 4]", 'load_resistance = "3 ohm"', 'does not apply to electrical.load = "maximum power"'),
    ('seebeck = "0.05 V/K"', "seebeck = 0.05", 'module.seebeck: 0.05 has no unit; write for example "0.05 V/K"'),
    ('seebeck = "0.05 V/K"', "seebeck = []", "has 0 entries"),
    ('seebeck = "0.05 V/K"', "seebeck = [nan]", "not a finite number"),
    ('seebeck = "0.05 V/K"', 'seebeck = ["0.05 V/K", "1 V/K"]', "per K^1"),
    ('["400 K", "0.65 W/K"]', '["200 K", "0.65 W/K"]', "its temperatures do not rise: 200 K comes after 300 K"),
    ('["400 K", "0.65 W/K"]', '["400 K", "-0.65 W/K"]', '"-0.65 W/K" is not possible; give above 0 W/K'),
    ('["400 K", "0.65 W/K"]', '"0.65 W/K"', "is not a list of pairs"),
    ('seebeck = "0.05 V/K"', "generator_rating = 3", "module.generator_rating: is a list of tables"),
    (
        'seebeck = "0.05 V/K"',
        'use = "nothing-like-it"',
        'module.use: "nothing-like-it" is no file and none of the bundled',
    ),
    ("[electrical]", "[electricl]", "electricl: unknown field; did you mean electrical?"),
    ("[electrical]", "[sweep]\nhot = 1\n[electrical]", "sweep.hot: is a section"),
    ("[electrical]", '[sweep]\n"hot.mass_flow" = 3\n[electrical]', "sweep.hot.mass_flow: is neither a list nor"),
]


@pytest.mark.parametrize(("old", "new", "message"), BAD)
def test_a_fault_names_line_and_field_and_what_to_do(old: str, new: str, message: str) -> None:
    text = changed((old, new))
    found = [fault for fault in faults(text) if message in fault]
    assert len(found) == 1, faults(text)
    assert found[0].startswith(f"case.toml:{line_of(text, new.splitlines()[-1 if 'gap' in old else 0])}: ") or (
        "[sweep]" in new
    )


def test_missing_things_are_named_with_an_example() -> None:
    assert faults(changed(('mass_flow = "0.5 kg/s"\n', ""))) == (
        'case.toml:3: hot.mass_flow: a flow is missing; give mass_flow, for example "0.5 kg/s", or volume_flow',
    )
    assert faults(changed(('inlet_temperature = "90 degC"\n', ""))) == (
        'case.toml:3: hot.inlet_temperature: is missing; give for example "90 degC"',
    )
    assert faults(changed(('gap = "3 mm"\n', ""))) == (
        'case.toml:9: hot.duct.gap: is missing; give for example "3 mm"',
    )
    whole = PLAIN[: PLAIN.index("[cold]")] + PLAIN[PLAIN.index("[stack]") :]
    assert faults(whole) == (
        "case.toml: cold: the section [cold] is missing; it gives fluid, inlet_temperature and more",
    )


def test_all_faults_are_reported_at_once_in_the_order_of_the_lines() -> None:
    text = changed(('"0.5 kg/s"', "0.5"), ("layers = 2", 'layers = "2"'), ('row_pitch = "44 mm"', 'row_pitch = "3 cm"'))
    found = faults(text, "cold.volume_flow=3", "hot.nonsense=4")
    assert [fault.split(": ")[1] for fault in found[:3]] == ["hot.mass_flow", "stack.layers", "stack.row_pitch"]
    assert found[3] == '--set cold.volume_flow: 3 has no unit; write for example "3 L/min"'
    assert found[4].startswith("--set hot.nonsense: unknown field")


@pytest.mark.parametrize(
    ("hot", "cold", "layers", "message"),
    [(1, 1, 3, ""), (2, 1, 2, ""), (2, 1, 3, "is odd"), (1, 2, 3, "is odd"), (2, 2, 4, ""), (2, 2, 2, "give 4, 6, 8")],
)
def test_faces_and_layers(hot: int, cold: int, layers: int, message: str) -> None:
    overrides = [f"hot.duct.faces={hot}", f"cold.duct.faces={cold}", f"stack.layers={layers}"]
    if message:
        assert [message in fault for fault in faults(PLAIN, *overrides)] == [True]
    else:
        assert read_case(PLAIN, overrides).stack.layers == layers


def test_a_million_million_rows_and_too_many_modules_are_refused() -> None:
    assert "at most 10000" in faults(PLAIN, "stack.rows=1000000000000")[0]
    found = faults(PLAIN, "stack.rows=10000", "stack.columns=1000", "electrical.row_blocks=[10000]")
    assert found == (
        "--set stack.rows: layers x rows x columns is 20,000,000 modules; at most 1,000,000 can be solved",
    )


EXHAUST = (
    'fluid = "water"\ninlet_temperature = "90 degC"\nmass_flow = "0.5 kg/s"\npressure = "1.5 bar gauge"\n',
    'fluid = "exhaust gas"\ninlet_temperature = "400 degC"\nfuel = "diesel"\n',
)


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ('mass_flow = "1 kg/s"\nexcess_air_ratio = 1.5', ""),
        ('mass_flow = "1 kg/s"\ndry_oxygen = "8 %"', ""),
        ('mass_flow = "1 kg/s"\nfuel_flow = "10 kg/h"', ""),
        ('fuel_flow = "10 kg/h"\nexcess_air_ratio = 1.5', ""),
        ('standard_volume_flow = "300 m^3/h at 0 degC, 1 atm, dry"\ndry_oxygen = 0.08', ""),
        ('standard_volume_flow = "300 m^3/h at 0 degC, 1 atm"\ndry_oxygen = 0.08', "whether the gas is wet or dry"),
        ('fuel_flow = "10 kg/h"', "hot.excess_air_ratio: is missing"),
        ("excess_air_ratio = 1.5", "hot.mass_flow: a flow is missing"),
        ('mass_flow = "1 kg/s"\nexcess_air_ratio = 1.5\ndry_oxygen = 0.08', "says the same as excess_air_ratio"),
        ('mass_flow = "1 kg/s"\nexcess_air_ratio = 1.5\nfuel_flow = "10 kg/h"', "give two of the three"),
        ('volume_flow = "1 m^3/s"\nfuel_flow = "10 kg/h"', "only with a mass_flow"),
        ('mass_flow = "1 kg/s"\nexcess_air_ratio = 0.9', "0.9 is not possible; give at least 1"),
        ('mass_flow = "1 kg/s"\nexcess_air_ratio = 1.5\nfuel_sulphur = 2', "hot.fuel_sulphur: 2 is not possible"),
    ],
)
def test_exhaust_gas_is_determined_once(lines: str, message: str) -> None:
    text = changed((EXHAUST[0], f"{EXHAUST[1]}{lines}\n"))
    if message:
        assert [message in fault for fault in faults(text)] == [True]
    else:
        assert read_case(text).hot.fuel == "diesel"


def test_a_reservoir_has_a_film_and_no_flow() -> None:
    old = 'fluid = "water"\ninlet_temperature = "20 degC"\nvolume_flow = "30 L/min"\nduct.gap = "3 mm"\n'
    new = 'fluid = "reservoir"\ninlet_temperature = "20 degC"\nfilm_coefficient = "500 W/(m^2 K)"\n'
    case = read_case(changed((old, new)))
    assert case.cold.film_coefficient == 500.0 and case.cold.mass_flow is None and case.cold.duct.gap is None
    assert "cold.drive" not in case.assumed and "cold.duct.gap" not in case.assumed
    assert 'does not apply to cold.fluid = "reservoir"' in faults(changed((old, new + 'mass_flow = "1 kg/s"\n')))[0]
    assert "film_coefficient: is missing" in faults(changed((old, new.replace("film_coefficient", "#"))))[0]


def test_drive_efficiency_has_a_default_by_drive() -> None:
    pump, fan = (read_case(PLAIN, [f"hot.drive={drive}"]) for drive in ("pump", "fan"))
    assert (pump.hot.drive_efficiency, fan.hot.drive_efficiency) == (0.35, 0.40)
    assert {"hot.drive_efficiency"} <= {each.path for each in assumptions(pump)}
    assert read_case(PLAIN).hot.drive_efficiency is None
    assert read_case(PLAIN, ["hot.drive=engine"]).hot.generator_efficiency == 0.90


def test_a_wall_needs_a_conductivity_and_connections_a_pipe() -> None:
    assert "hot.duct.wall_conductivity: is missing" in faults(PLAIN, "hot.duct.wall_thickness=1 mm")[0]
    assert "cold.duct.connection_diameter: is missing" in faults(PLAIN, "cold.duct.connection_loss_coefficient=2")[0]
    fins = ["hot.duct.kind=plain fins", "hot.duct.fin_thickness=2 mm", "hot.duct.fin_conductivity=200 W/(m K)"]
    assert "is not below the fin_pitch of 1.000 mm" in faults(PLAIN, *fins, "hot.duct.fin_pitch=1 mm")[0]


def test_glycol_needs_one_fraction() -> None:
    glycol = "hot.fluid=ethylene glycol"
    assert "volume_fraction: is missing" in faults(PLAIN, glycol)[0]
    assert "give at least 0 and at most 1" in faults(PLAIN, glycol, "hot.mass_fraction=1.2")[0]
    assert read_case(PLAIN, [glycol, "hot.mass_fraction=50 %"]).hot.mass_fraction == pytest.approx(0.5)
    text = changed(('fluid = "water"', 'fluid = "ethylene glycol"\nmass_fraction = 0.5\nvolume_fraction = 0.5'))
    assert "hot.volume_fraction: is a second fraction" in faults(text)[0]


def test_options_go_before_the_file_and_replace_the_other_flow() -> None:
    case = read_case(
        PLAIN, ["hot.volume_flow=3 m^3/h", "stack.rows=8", "electrical.row_blocks=[8]", "title=another = one"]
    )
    assert case.hot.mass_flow is None and case.hot.volume_flow == pytest.approx(3 / 3600)
    assert (case.stack.rows, case.electrical.row_blocks, case.title) == (8, (8,), "another = one")
    quoted = read_case(PLAIN, ['hot.mass_flow="0.4 kg/s"'])
    assert quoted.hot.mass_flow == 0.4


@pytest.mark.parametrize("override", ["hot.mass_flow", "", "=", "a.b.c.d=1", "title.x=1", "hot=1", "hot.duct.gap="])
def test_options_that_mean_nothing_are_refused_in_one_line(override: str) -> None:
    found = faults(PLAIN, override)
    assert any(fault.startswith("--set ") for fault in found)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"", "is empty"),
        (b" \n\n", "is empty"),
        (b"[hot\n", r":1: not TOML: .*; a value with a unit stands in quotes"),
        (b"[hot]\nmass_flow = 0.5 kg/s\n", r":2: not TOML"),
        (b"\xff\xfe\x00", "is not UTF-8 text"),
        (b"\x00\x01", "not TOML"),
        (b"a = " + b"[" * 100_000, "not TOML|nested too deeply"),
        (b"a." * 20_000 + b"b = 1", "a key of more than 20 parts"),
        (b"a = 1\na = 2\n", "not TOML"),
        (b"a = " + b"9" * 10_000, "not TOML"),
        (b"#" * 2_000_000, "larger than 1 MiB"),
    ],
)
def test_files_that_are_no_case_get_one_line(tmp_path: Path, content: bytes, message: str) -> None:
    path = tmp_path / "case.toml"
    path.write_bytes(content)
    with pytest.raises(CaseError, match=message) as caught:
        load_case(path)
    assert len(caught.value.faults) == 1 and str(path) in str(caught.value)


def test_places_that_are_no_file_get_one_line(tmp_path: Path) -> None:
    huge = tmp_path / "huge.toml"
    with huge.open("wb") as file:
        file.truncate(2 * 2**30)
    for place, message in (
        (huge, "larger than 1 MiB"),
        (Path("/dev/zero"), "larger than 1 MiB"),
        (tmp_path, "is a directory"),
        (tmp_path / "none.toml", "there is no such file"),
        (tmp_path / ("x" * 5000), "cannot be read"),
        (Path("a\0b"), "cannot be read"),
    ):
        with pytest.raises(CaseError, match=message):
            load_case(place)


def test_a_text_is_read_as_a_case_and_a_name_as_a_file(tmp_path: Path) -> None:
    path = tmp_path / "case.toml"
    path.write_text(PLAIN.replace("\n", "\r\n"), encoding="utf-8-sig", newline="")
    assert load_case(PLAIN) == load_case(path) == load_case(str(path))


def test_a_module_record_is_found_from_the_case_and_the_case_goes_before_it(tmp_path: Path) -> None:
    (tmp_path / "records").mkdir()
    (tmp_path / "records" / "n.toml").write_text("", encoding="utf-8")
    record = tmp_path / "records" / "mine.toml"
    record.write_text(
        'footprint = ["30 mm", "40 mm"]\ndescription = "invented"\n[legs]\ncouples = 127\nlength = "1.6 mm"\n'
        'area = "1.96 mm^2"\nn_material = "n.toml"\np_material = "n.toml"\n',
        encoding="utf-8",
    )
    start = PLAIN.index("footprint")
    text = PLAIN[:start] + 'use = "records/mine.toml"\nlegs.length = "1.2 mm"\n' + PLAIN[PLAIN.index("[electrical]") :]
    case_path = tmp_path / "case.toml"
    case_path.write_text(text, encoding="utf-8")
    case = load_case(case_path)
    assert case.module.footprint == (0.03, 0.04)
    assert case.module.legs is not None
    assert (case.module.legs.couples, case.module.legs.length) == (127, 0.0012)
    assert Path(case.module.legs.n_material) == (tmp_path / "records" / "n.toml").resolve()
    before = case_hash(case)
    (tmp_path / "records" / "n.toml").write_text("# other content", encoding="utf-8")
    assert case_hash(case) != before
    record.write_text(record.read_text(encoding="utf-8").replace("127", "127.5"), encoding="utf-8")
    with pytest.raises(CaseError, match=r"^mine.toml:4: module.legs.couples: 127.5 is not a whole number"):
        load_case(case_path)


DATA = Path(harvest.__file__).parent / "data" / "modules"


@pytest.mark.parametrize("name", sorted(each.stem for each in DATA.glob("*.toml")))
def test_every_bundled_module_can_be_used(name: str) -> None:
    text = PLAIN[: PLAIN.index("footprint")] + f'use = "{name}"\n' + PLAIN[PLAIN.index("[electrical]") :]
    case = read_case(text, ["stack.row_pitch=0.2 m", "stack.column_pitch=0.2 m"])
    assert case.module.use == name
    module = case.module
    ways = (module.seebeck, module.legs, module.cooler_rating, module.generator_rating)
    assert sum(way is not None for way in ways) == 1
    assert replace(case, {"stack.row_pitch": 0.2}) == case


def test_a_module_is_described_in_one_way(tmp_path: Path) -> None:
    material = tmp_path / "n.toml"
    material.write_text("", encoding="utf-8")
    legs = '[module.legs]\ncouples = 1\nlength = "1 mm"\narea = "1 mm^2"\n'
    legs += f'n_material = "{material}"\np_material = "{material}"\n'
    assert "describe the module in one way" in faults(changed(("[electrical]", legs + "[electrical]")))[0]
    assert "module.seebeck: is missing beside" in faults(changed(('seebeck = "0.05 V/K"\n', "")))[0]
    nothing = PLAIN[: PLAIN.index("seebeck")] + PLAIN[PLAIN.index("[electrical]") :]
    assert "module: is not described" in faults(nothing)[0]


TABLE = changed(('fluid = "water"\n', 'fluid = "table"\n')).replace("[hot.duct]", "{table}\n[hot.duct]")


def test_a_fluid_table_of_lists_constants_or_a_file(tmp_path: Path) -> None:
    constant = '[hot.table]\ndensity = "900 kg/m^3"\nheat_capacity = "2 kJ/(kg K)"\nviscosity = "2 mPa s"\n'
    constant += 'conductivity = "0.1 W/(m K)"\n'
    rows = read_case(TABLE.format(table=constant)).hot.table
    assert rows == ((300.0, 900.0, 2000.0, 0.002, 0.1),)
    lists = constant.replace('"900 kg/m^3"', '["900 kg/m^3", "800 kg/m^3"]') + 'temperature = ["300 K", "400 K"]\n'
    rows = read_case(TABLE.format(table=lists)).hot.table
    assert rows == ((300.0, 900.0, 2000.0, 0.002, 0.1), (400.0, 800.0, 2000.0, 0.002, 0.1))
    (tmp_path / "oil.csv").write_text(
        "temperature [K],density [kg/m^3],viscosity [mPa s],heat_capacity [kJ/(kg K)],conductivity [W/(m K)]\n"
        "300,900,2,2,0.1\n400,800,2,2,0.1\n",
        encoding="utf-8",
    )
    assert read_case(TABLE.format(table='table = "oil.csv"'), folder=tmp_path).hot.table == rows
    assert "hot.table: has no conductivity" in faults(TABLE.format(table=constant.partition("conductivity")[0]))[0]
    assert (
        "density has 2 entries, and temperature has 1"
        in faults(TABLE.format(table=lists.replace('["300 K", "400 K"]', '["300 K"]')))[0]
    )
    assert "there is no such file" in faults(TABLE.format(table='table = "none.csv"'))[0]


def test_replace_takes_numbers_texts_arrays_and_pint() -> None:
    case = read_case(PLAIN)
    quantity = pint.UnitRegistry().Quantity(100.0, "degC")
    other = replace(
        case,
        {
            "hot.mass_flow": 0.1 + 0.2,
            "hot.inlet_temperature": quantity,
            "cold.mass_flow": np.float64(0.3),
            "stack.rows": np.int64(8),
            "electrical.row_blocks": (4, 4),
            "cold.inlet_temperature": "50 degF",
            "module.seebeck": [0.06, 1e-5],
            "electrical.converter_window": (18.0, 60.0),
        },
    )
    assert other.hot.mass_flow == 0.1 + 0.2
    assert other.hot.inlet_temperature == pytest.approx(373.15)
    assert (other.cold.mass_flow, other.cold.volume_flow, other.stack.rows) == (0.3, None, 8)
    assert other.cold.inlet_temperature == pytest.approx(283.15)
    assert other.module.seebeck == Curve("polynomial", (0.06, 1e-5))
    assert other.electrical.converter_window == (18.0, 60.0)
    assert case == read_case(PLAIN)
    for path, value, message in (
        ("hot.mass_flow", -1.0, "give above 0"),
        ("hot.mass_flow", float("nan"), "not a number"),
        ("hot.mass_flw", 1.0, "unknown field; did you mean hot.mass_flow?"),
        ("hot.mass_flow", quantity, "does not convert"),
    ):
        with pytest.raises(CaseError, match=message):
            replace(case, {path: value})


def test_every_given_value_can_be_put_back() -> None:
    case = read_case(PLAIN, ["hot.fluid=air", "hot.standard_volume_flow=300 m^3/h at 0 degC, 1 atm"])
    values = {path: value_at(case, path) for path in DECLARATIONS if _was_given(case, path)}
    values = {path: value for path, value in values.items() if DECLARATIONS[path].section is None}
    assert isinstance(values["hot.standard_volume_flow"], StandardVolumeFlow)
    assert replace(case, values) == case


def _was_given(case: Case, path: str) -> bool:
    table: Any = case.given
    for name in path.split("."):
        if not isinstance(table, dict) or name not in table:
            return False
        table = table[name]
    return True


def test_the_hash_does_not_see_how_units_are_written() -> None:
    case = read_case(PLAIN)
    same = [
        "hot.mass_flow=1800 kg/h",
        "hot.inlet_temperature=194 degF",
        "cold.volume_flow=1.8 m3/h",
        "hot.pressure=251.325 kPa",
        "stack.row_pitch=4.4 cm",
        "title=Another title",
        'module.conductance=[["26.85 degC", "600 mW/K"], ["126.85 degC", "650 mW/K"]]',
    ]
    assert case_hash(read_case(PLAIN, same)) == case_hash(case)
    assert case_hash(read_case(PLAIN, ["hot.mass_flow=0.50001 kg/s"])) != case_hash(case)
    assert len(case_hash(case)) == 64


def test_assumptions_tell_what_was_not_given_and_why() -> None:
    told = {each.path: each for each in assumptions(read_case(PLAIN))}
    assert told["cold.fouling"].value == "0 m^2 K/W" and "clean" in told["cold.fouling"].reason
    assert told["cold.pressure"].value == "101.3 kPa"
    assert "hot.pressure" not in told and "hot.fuel_sulphur" not in told
    assert "hot.fouling" not in {each.path for each in assumptions(read_case(PLAIN, ["hot.fouling=0 m^2 K/W"]))}


def test_every_field_is_explained_and_declared_soundly() -> None:
    for path, declaration in fields():
        told = explain(path)
        assert told.startswith(path) and declaration.meaning in told
        assert declaration.meaning.endswith(".")
        assert declaration.kind in {*KINDS, STANDARD_VOLUME_FLOW, ENERGY_PRICE, "materials", "modules"}
        if declaration.applies is not None:
            owner = path.rpartition(".")[0]
            selectors = {f"{owner}.{declaration.applies[0]}", f"{owner.partition('.')[0]}.{declaration.applies[0]}"}
            selector = next(DECLARATIONS[each] for each in selectors if each in DECLARATIONS)
            assert set(declaration.applies[1]) <= set(selector.choices)


def test_explain_finds_a_field_by_the_end_of_its_path_or_the_nearest() -> None:
    assert 'write: "0.5 kg/s"' in explain("mass_flow")
    assert explain("inlet_temperature").count("Temperature of the stream") == 1
    assert "stack.layers" in explain("layers") and "did you mean" not in explain("layers")
    assert "0.35 for pump" in explain("hot.drive_efficiency")
    assert "plain SI numbers" in explain("module.seebeck")
    with pytest.raises(InputError, match=r"mas_flow: unknown field; did you mean .*mass_flow\?"):
        explain("mas_flow")


def test_lines_are_found_through_headers_dotted_and_quoted_keys() -> None:
    lines = key_lines('a = 1\n[b]\nc.d = 2\n[b."e f"]\n# g = 3\ng = """\nh = 1"""\n[[k]]\n l = 4\n[[k]]\nl = 5\n')
    assert {
        path: lines[path] for path in ("a", "b", "b.c.d", "b.e f", "b.e f.g", "k.l", "k[1].l", "k[2]", "k[2].l")
    } == {
        "a": 1,
        "b": 2,
        "b.c.d": 3,
        "b.e f": 4,
        "b.e f.g": 6,
        "k.l": 9,
        "k[1].l": 9,
        "k[2]": 10,
        "k[2].l": 11,
    }
    assert "b.e f.# g" not in lines


def test_reading_a_case_imports_nothing_heavy() -> None:
    program = (
        "import sys\nfrom harvest.model.reading import load_case\nload_case(sys.stdin.read())\n"
        "print([name for name in ('scipy', 'CoolProp', 'pint', 'matplotlib', 'difflib') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", program], input=PLAIN, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_every_rule_can_be_judged_on_a_sound_case() -> None:
    # a rule that asks for a misspelt path would raise KeyError here instead of being passed over
    from harvest.model.reading import _Reading

    reading = _Reading("case", Path(), {})
    reading.read(dict(read_case(PLAIN).given))
    assert reading.faults == [] and list(broken_rules(reading.values)) == []


anything = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=10),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=5), inner, max_size=3),
    max_leaves=5,
)


@settings(max_examples=200, deadline=None)
@given(st.sampled_from([path for path in DECLARATIONS if "." in path or path in ("size", "sweep", "title")]), anything)
def test_whatever_stands_in_a_field_gives_a_case_or_faults(path: str, value: Any) -> None:
    document: dict[str, Any] = {}
    for name, table in read_case(PLAIN).given.items():
        document[name] = dict(table) if isinstance(table, dict) else table
    *parents, last = path.split(".")
    inside = document
    for parent in parents:
        inside[parent] = dict(inside.get(parent, {}))
        inside = inside[parent]
    inside[last] = value
    told = ""
    try:
        case_from(document)
    except CaseError as error:
        told = "".join(error.faults)
    assert "\n" not in told


def test_dots_in_comments_and_lists_are_no_long_keys() -> None:
    pairs = ",\n".join(f'["{300 + n}.5 K", "0.6 W/K"]' for n in range(30))
    text = "# " + "." * 200 + "\n" + changed(('[["300 K", "0.6 W/K"], ["400 K", "0.65 W/K"]]', f"[\n{pairs}\n]"))
    conductance = read_case(text).module.conductance
    assert conductance is not None and len(conductance.values) == 30
    coefficients = ", ".join(["1.5"] * 9)
    assert read_case(changed(('"0.05 V/K"', f"[\n{coefficients}\n]"))).module.seebeck == Curve("polynomial", (1.5,) * 9)


def test_names_with_line_ends_stay_in_one_line() -> None:
    for text in ('"a\\nb" = 1\n', '[hot.table]\n"a\\nb" = 1\n', '[sweep]\n"a\\nb" = 1\n'):
        assert any("a b" in fault for fault in faults(text)) or "[hot.table]" in text


@settings(max_examples=100, deadline=None)
@given(st.text(max_size=200))
def test_no_text_gives_anything_but_faults(text: str) -> None:
    with pytest.raises(CaseError):
        read_case(text)


def test_whole_names_may_stand_in_quotes_after_set_as_in_the_file() -> None:
    example = Path(__file__).parents[1] / "examples" / "genset-jacket-water.toml"
    bare, quoted = (
        load_case(example, [f'size.{name}=["2 mm", "3 mm"]', "size.rows=[4]"])
        for name in ("hot.duct.gap", '"hot.duct.gap"')
    )
    assert quoted.size == bare.size
    assert quoted.size is not None and quoted.size.fields == {"hot.duct.gap": (0.002, 0.003)}
