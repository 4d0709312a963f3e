"""The case file: what a good one becomes, and what is said of a bad one."""

import hashlib
import math
import pickle
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from pydantic import BaseModel, ValidationError

from fluxmesh.case.groups import GroupSection
from fluxmesh.case.model import CaseTables
from fluxmesh.case.problems import dotted
from fluxmesh.case.read import parse_case, read_case
from fluxmesh.case.values import UnitScale
from fluxmesh.errors import CaseError, FileError, FluxmeshError, InputError
from fluxmesh.surface.surface import Role
from fluxmesh.units import Measured

CASES = Path(__file__).parent / "cases"
BASES = {name: (CASES / f"{name}.toml").read_text(encoding="utf-8") for name in ("full", "picked", "separate")}
# "full" has every table; "picked" a mesh without tags and all data supplied; "separate" a file for each group
FULL, PICKED, SEPARATE = BASES.values()


def parsed(text):
    return parse_case(text.encode(), Path("/plant/rinse.toml"))


def changed(text, old, new):
    assert text.count(old) == 1, old
    return text.replace(old, new)


def test_a_full_case_in_si():
    case = parsed(FULL)
    assert case.title == "Rinse header, duty point"
    assert (case.name, case.folder) == ("rinse", Path("/plant"))
    assert case.sha256 == hashlib.sha256(FULL.encode()).hexdigest()
    assert case.surface.file == Path("/plant/mesh/rinse_header.vtp")
    assert case.surface.length_unit == UnitScale("mm", 1e-3)
    assert case.surface.weld == Measured(1e-6)
    assert case.surface.closed
    assert (case.surface.groups.array, case.surface.groups.sets) == ("region", False)
    assert case.fluid.density == Measured(998.2, 0.5)
    assert case.fluid.gravity == (0.0, 0.0, -9.80665)
    assert case.flow.velocity.array == ("VelocityX", "VelocityY", "VelocityZ")
    assert_allclose(case.flow.velocity.unit.factor, 0.3048, rtol=1e-15)
    assert case.flow.velocity.at is None
    assert case.flow.pressure.unit == UnitScale("kPa", 1000.0)
    assert (case.flow.pressure.kind, case.flow.pressure.head) == ("absolute", "removed")
    assert case.flow.pressure.datum == (0.0, 0.0, 1.0)
    assert case.flow.pressure.at == "nodes"
    assert (case.flow.traction.array, case.flow.traction.acts_on) == (("tau",), "fluid")
    assert_allclose(case.flow.mass_flux.unit.factor, 0.45359237 / 3600, rtol=1e-15)
    assert case.flow.mass_flux.positive == "face-normal"
    assert case.flow.density.unit == UnitScale("kg/m^3", 1.0)
    assert list(case.groups) == ["feed", "spray", "shell"]
    feed, spray, shell = case.groups.values()
    assert (feed.role, feed.tag, feed.supplied_flow()) == (Role.INLET, (3, "feed"), ("flow_rate",))
    assert_allclose(float(feed.flow_rate), 42 / 3600, rtol=1e-15)
    assert (feed.pressure, feed.pressure_kind, feed.density) == (Measured(310e3), "absolute", Measured(998.0))
    assert (spray.role, spray.tag, spray.mass_flow) == (Role.OPEN, None, Measured(-1.0))
    assert (shell.role, shell.rest, shell.supplied_flow()) == (Role.WALL, True, ())
    assert case.hardware.mass == Measured(12.5)
    assert_allclose(case.hardware.centre, [0.01, 0.02, 0.03], rtol=1e-15)
    assert case.anchor.at == (0.1, 0.0, 0.0)
    assert case.closure.tolerance == 0.005
    assert (case.reported.force, case.reported.moment) == ((1.0, 2.0, 3.0), (4.0, 5.0, 6.0))
    assert case.reported.on == ("shell",)


def test_a_case_of_picked_ports():
    case = parsed(PICKED)
    feed, drain, _ = case.groups.values()
    assert feed.pick.normal == (0.0, 0.0, 1.0)
    assert_allclose(feed.pick.near, [0, 0, 0.025], rtol=1e-15)
    assert_allclose([feed.pick.angle, drain.pick.angle], [math.radians(2), math.radians(1)], rtol=1e-15)
    assert_allclose(feed.velocity, [0, 0, -6 / 3.6], rtol=1e-15)
    assert feed.pressure_kind == "gauge"
    assert not case.surface.closed


def test_what_is_left_out_is_stated():
    case = parsed(PICKED)
    assert case.title == ""
    assert case.surface.length_unit == UnitScale("m", 1.0)
    assert case.surface.groups is None
    assert case.fluid.gravity == (0.0, 0.0, 0.0)
    assert case.fluid.ambient_pressure is None
    assert case.flow.model_fields_set == set()
    assert case.hardware is None
    assert case.reported is None
    assert case.anchor.at == (0.0, 0.0, 0.0)
    assert case.closure.tolerance == 0.01
    assert case.closure.encloses_hardware
    flow = parsed(
        changed(PICKED, "[groups.feed]", '[flow]\npressure.array = "p"\nvelocity.array = "U"\n[groups.feed]')
    ).flow
    assert (flow.pressure.kind, flow.pressure.head, flow.pressure.unit) == ("gauge", "included", UnitScale("Pa", 1.0))
    assert (flow.velocity.frame, flow.velocity.unit) == ("absolute", UnitScale("m/s", 1.0))


def test_one_file_a_group():
    files = parsed(SEPARATE).surface.files
    assert files == {"feed": Path("/plant/feed.stl"), "shell": Path("/data/shell.stl")}


def test_named_sets():
    case = parsed(changed(FULL, 'array = "region"', "sets = true"))
    assert case.surface.groups.sets
    assert case.surface.groups.array is None


def test_a_kinematic_pressure_has_its_own_unit():
    lines = 'pressure = { array = "p", kind = "kinematic" }\nvelocity = { array = "U" }'
    case = parsed(changed(PICKED, "[groups.feed]", f"[flow]\n{lines}\n[groups.feed]"))
    assert case.flow.pressure.unit == UnitScale("m^2/s^2", 1.0)


def test_a_mass_flux_carries_flow_without_a_density():
    text = changed(PICKED, "[fluid]\ndensity = 1000", '[flow]\nvelocity.array = "U"\nmass_flux.array = "phi"')
    text = changed(text, 'velocity = { value = [0, 0, -6], unit = "km/h" }', "")
    assert parsed(changed(text, 'speed = "1.5 m/s"', "")).fluid.density is None


def test_a_surface_around_hardware():
    text = changed(PICKED, 'role = "wall"', 'role = "symmetry"')
    assert not parsed(text + "[closure]\nencloses_hardware = false").closure.encloses_hardware


def test_a_case_is_frozen_and_pickles():
    case = parsed(FULL)
    assert pickle.loads(pickle.dumps(case)) == case
    with pytest.raises(ValidationError, match="frozen"):
        case.title = "another"


def test_a_file_is_read(tmp_path):
    path = tmp_path / "rinse.toml"
    path.write_bytes(b"\xef\xbb\xbf" + FULL.replace("\n", "\r\n").encode())
    case = read_case(path)
    assert case.surface.file == tmp_path / "mesh/rinse_header.vtp"
    assert case.groups == parsed(FULL).groups
    assert read_case(str(path)) == case


FAULTS = [
    pytest.param(*fault.groups(), id=fault["name"])
    for fault in re.finditer(
        r"# (?P<name>.*) \((?P<base>\w+)\)\n(?P<old>(?:- .*\n)+)(?P<new>(?:\+ .*\n)*)(?P<kind>\w+): (?P<message>.+)",
        (CASES / "faults.txt").read_text(encoding="utf-8"),
    )
]


def test_every_fault_of_the_file_is_tried():
    text = (CASES / "faults.txt").read_text(encoding="utf-8")
    assert len(FAULTS) == len(re.findall("^# ", text, re.MULTILINE)) > 80


@pytest.mark.parametrize(("name", "base", "old", "new", "kind", "message"), FAULTS)
def test_a_fault_is_named(name, base, old, new, kind, message):
    old, new = ("\n".join(line[2:] for line in part.splitlines()) for part in (old, new))
    with pytest.raises(InputError) as caught:
        parsed(changed(BASES[base], old, new))
    assert type(caught.value).__name__ == kind
    assert str(caught.value) == message
    assert str(pickle.loads(pickle.dumps(caught.value))) == message


def test_a_gauge_pressure_below_vacuum():
    text = changed(PICKED, "density = 1000", 'density = 1000\nambient_pressure = "1 bar"')
    assert parsed(text.replace('"3 bar"', '"-0.9 bar"')).groups["feed"].pressure.value == -90e3
    with pytest.raises(CaseError, match=r"groups\.feed\.pressure: the pressure would be -20000 Pa absolute"):
        parsed(text.replace('"3 bar"', '"-1.2 bar"'))


def test_a_kinematic_pressure_without_a_density():
    text = 'surface.file = "a.vtp"\n[flow]\npressure = { array = "p", kind = "kinematic" }\n[groups.a]\nrole = "wall"\n'
    with pytest.raises(CaseError, match=r"flow\.pressure\.kind: the pressure is kinematic, but the density is not"):
        parsed(text + "rest = true")


def test_a_mass_flux_without_a_velocity_needs_a_density():
    text = '[surface]\nfile = "a.vtp"\n[flow]\nmass_flux.array = "phi"\n[groups.a]\nrole = "open"\nrest = true'
    with pytest.raises(CaseError, match=r"fluid\.density: missing"):
        parsed(text)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        (
            "shell = ",
            "shel = ",
            r'2 things are wrong\n  groups\.shell: surface\.files has no file for this group\. Did you mean "shel"\?\n'
            r'  surface\.files\.shel: there is no table \[groups\.shel\]\. Did you mean "shell"\?$',
        ),
        (
            'role = "wall"',
            'role = "wall"\ntag = 3',
            r"groups\.shell\.tag: surface\.files already says which faces the group has\. Leave out tag",
        ),
        ('role = "wall"', 'role = "wall"\nrest = true', r"groups\.shell\.rest: surface\.files already says"),
        (
            "[fluid]",
            'groups = { array = "region" }\n[fluid]',
            r"surface\.groups: files already gives each group a file",
        ),
        ('"feed.stl"', "3", r"surface\.files\.feed: found the number 3, not a text"),
        ('{ feed = "feed.stl", shell = "/data/shell.stl" }', "{}", r"There are none"),
    ],
)
def test_a_fault_of_separate_files_is_named(old, new, message):
    with pytest.raises(CaseError, match=message):
        parsed(changed(SEPARATE, old, new))


def test_several_faults_in_one_message():
    text = changed(changed(FULL, '"42 m^3/h"', '"3 kg"'), "[anchor]", "[ancor]")
    with pytest.raises(CaseError) as caught:
        parsed(text)
    first, *others = str(caught.value).splitlines()
    assert first == "rinse.toml: 2 things are wrong"
    assert [line.split(":")[0].strip() for line in others] == ["ancor", "groups.feed.flow_rate"]


def test_many_faults_are_cut_short():
    groups = "".join(f"[groups.g{number}]\nrole = 3\n" for number in range(14))
    with pytest.raises(CaseError, match=r"14 things are wrong\n(  groups\.g\d+\.role: .*\n){10}  and 4 more$"):
        parsed(f'[surface]\nfile = "a.vtp"\n{groups}')


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", r"groups: missing\. Give a table \[groups\.NAME\].*\n.*surface: missing\. Give a table \[surface\]"),
        ('[surface]\nfile = "a.vtp"\n[groups]', r"groups: there is no group\. Write a table \[groups\.NAME\]"),
        ('groups = 3\n[surface]\nfile = "a.vtp"', r"groups: found the number 3, not a table\. Write a table$"),
        (
            'groups.a = 3\nsurface.file = "a.vtp"',
            r"groups\.a: found the number 3, not a table\. Write a table with keys such as role",
        ),
        (
            'surface = "a.vtp"\ngroups.a.role = "wall"',
            r'surface: found "a\.vtp", not a table\. Write a table with keys such as file',
        ),
    ],
)
def test_a_case_without_its_tables(text, message):
    with pytest.raises(CaseError, match=message):
        parsed(text)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"title = ", r"rinse\.toml: it is not valid TOML: Invalid value \(at .*\)\. See toml\.io"),
        (b"a = 1\nb = \n", r"\(at line 2, column 5\)"),
        (b"a = 1\na = 2", r"Cannot overwrite a value"),
        (b"a = 1\n\n# \xff\xfe", r"rinse\.toml: line 3 is not UTF-8 text\. Give a case file in TOML, saved as UTF-8"),
        (b"a = " + b"[" * 100_000, r"nested too deeply"),
        (b"a = " + b"9" * 5000, r"it is not valid TOML"),
        (b"#" * 4_000_001, r"it is larger than 4 MB\. Is this the mesh, not the case\?"),
    ],
)
def test_what_is_no_toml(content, message, tmp_path):
    path = tmp_path / "rinse.toml"
    path.write_bytes(content)
    with pytest.raises(FileError, match=message) as caught:
        read_case(path)
    assert caught.value.where == str(path)


def test_no_such_file(tmp_path):
    with pytest.raises(FileError, match=r"absent\.toml: there is no such file"):
        read_case(tmp_path / "absent.toml")
    with pytest.raises(FileError, match=r"this is a folder\. Give the case file in it"):
        read_case(tmp_path)
    with pytest.raises(FileError, match=r"it cannot be read: "):
        read_case(tmp_path / "a\0b.toml")
    (tmp_path / "plain").write_text("")
    with pytest.raises(FileError, match=r"it cannot be read: Not a directory"):
        read_case(tmp_path / "plain" / "rinse.toml")


def test_the_models_serve_without_a_file():
    group = GroupSection(role=Role.INLET, speed=Measured(2.0, 0.1), velocity=None)
    assert group.speed == Measured(2.0, 0.1)
    assert GroupSection(role="inlet", speed="2 +/- 0.1 m/s") == GroupSection(role="inlet", speed=Measured(2.0, 0.1))
    tables = {"surface": {"file": "a.vtp"}, "groups": {"a": {"role": "open", "rest": True}}}
    with pytest.raises(ValidationError, match=r'groups\.a: group "a" is an open boundary but nothing says how much'):
        CaseTables.model_validate(tables)
    tables["groups"]["a"]["role"] = "wall"
    assert CaseTables.model_validate(tables).surface.file == Path("a.vtp")
    tables["surface"] = {"file": Path("b.vtp"), "length_unit": UnitScale("mm", 1e-3)}
    assert CaseTables.model_validate(tables).surface.length_unit.factor == 1e-3


def test_keys_as_toml_writes_them():
    assert dotted("groups", "feed-1", 3) == "groups.feed-1.3"
    assert dotted("groups", "feed pipe", "role") == 'groups."feed pipe".role'


def tables_below(model):
    yield model
    for field in model.model_fields.values():
        pending = [field.annotation]
        while pending:
            kind = pending.pop()
            pending.extend(getattr(kind, "__args__", ()))
            if isinstance(kind, type) and issubclass(kind, BaseModel):
                yield from tables_below(kind)


def test_every_table_is_frozen_and_forbids_other_keys():
    tables = set(tables_below(CaseTables))
    assert len(tables) == 31
    for table in tables:
        assert table.model_config["frozen"]
        assert table.model_config["extra"] == "forbid"


def test_reading_a_case_does_not_start_the_unit_registry(tmp_path):
    (tmp_path / "rinse.toml").write_text(FULL)
    program = (
        "import sys; from fluxmesh.case.read import read_case; read_case(sys.argv[1]); assert 'pint' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", program, str(tmp_path / "rinse.toml")], check=True)


# values of every TOML kind, put at every place of a good case
VALUES = st.recursive(
    st.one_of(
        st.booleans(), st.integers(), st.floats(), st.text(max_size=20), st.dates(),
        st.sampled_from(["inlet", "wall", "3 kg", "1 m/s", "p", "gauge", "removed", "sets", [0, 0, 1], "310 kPa"]),
    ),
    lambda inner: st.one_of(
        st.lists(inner, max_size=4),
        st.dictionaries(st.sampled_from(["array", "unit", "value", "role", "x y", "kind", "tag"]), inner, max_size=3),
    ),
    max_leaves=6,
)  # fmt: skip


def places(table, above=()):
    for key, value in table.items():
        yield (*above, key)
        if isinstance(value, dict):
            yield from places(value, (*above, key))


PLACES = [*places(tomllib.loads(FULL)), ("frame",), ("groups", "new"), ("surface", "files"), ("surface", "closed")]


def as_toml(value):
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return '"' + "".join(f"\\U{ord(letter):08x}" for letter in value) + '"'
    if isinstance(value, list):
        return f"[{', '.join(map(as_toml, value))}]"
    if isinstance(value, dict):
        return f"{{{', '.join(f'{as_toml(key)} = {as_toml(entry)}' for key, entry in value.items())}}}"
    return str(value)


def outcome(content):
    try:
        return parse_case(content, Path("/plant/rinse.toml"))
    except FluxmeshError as error:
        return str(error)


@settings(deadline=None)
@given(st.lists(st.tuples(st.sampled_from(PLACES), VALUES), min_size=1, max_size=3))
def test_any_value_anywhere_is_a_case_or_a_message(changes):
    document = tomllib.loads(FULL)
    for (*above, last), value in changes:
        table = document
        for key in above:
            table = table.get(key, {}) if isinstance(table, dict) else {}
        if isinstance(table, dict):
            table[last] = value
    text = "\n".join(f"{as_toml(key)} = {as_toml(value)}" for key, value in document.items())
    result = outcome(text.encode())
    if isinstance(result, str):
        assert "rinse.toml: " in result
        assert all(line.isprintable() for line in result.splitlines())
    else:
        assert result.groups


LINES = st.sampled_from([*FULL.splitlines(), *PICKED.splitlines(), *SEPARATE.splitlines(), "x", "= 3", '"""', "[["])


@settings(deadline=None)
@given(st.one_of(st.binary(max_size=200), st.text().map(str.encode), st.lists(LINES).map("\n".join).map(str.encode)))
def test_any_file_is_a_case_or_a_message(content):
    result = outcome(content)
    assert not isinstance(result, str) or "rinse.toml: " in result
