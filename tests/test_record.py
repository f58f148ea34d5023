"""Aircraft records: the demo's magnitudes, the combination of states, and every kind of fault."""

import copy
import math
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from perf.errors import InputError, RecordError
from perf.polar import glide_tangent
from perf.record import AircraftRecord, load_record, load_records

KT_MPS = 1852.0 / 3600.0
DEMO = Path(__file__).parent.parent / "demo_data" / "aircraft"

MANUAL: dict[str, Any] = {
    "name": "Invented",
    "mass": {"minimum_kg": 500, "maximum_kg": 800, "source": "invented"},
    "speeds": {
        "stall_eas_kt": 45,
        "stall_mass_kg": 800,
        "maximum_glide_eas_kt": 120,
        "source": "invented",
    },
    "glide": {
        "best_glide_eas_kt": 70,
        "ratio": 9,
        "mass_kg": 800,
        "propeller": "windmilling",
        "configuration": "clean",
        "source": "invented",
    },
    "propeller": [
        {"state": "windmilling", "source": "invented"},
        {"state": "stopped", "drag_factor": 0.81, "source": "invented"},
        {"state": "feathered", "best_glide_eas_kt": 74, "ratio": 11, "source": "invented"},
        {"state": "idle", "drag_factor": 1.2, "source": "invented"},
    ],
    "configuration": [
        {"name": "clean", "source": "invented"},
        {"name": "flaps", "drag_factor": 1.5, "stall_eas_kt": 40, "source": "invented"},
    ],
}


def drag_form() -> dict[str, Any]:
    """Return the same record with CD0, K and wing area."""
    data = copy.deepcopy(MANUAL)
    for key in ("best_glide_eas_kt", "ratio", "mass_kg"):
        del data["glide"][key]
    data["glide"] |= {"cd0": 0.05, "k": 0.06, "wing_area_m2": 13.0}
    return data


def changed(path: str, value: Any, base: dict[str, Any] = MANUAL) -> dict[str, Any]:
    """Return a copy of a record with one value replaced; the path is dotted."""
    data = copy.deepcopy(base)
    *parents, last = path.split(".")
    place: Any = data
    for key in parents:
        place = place[int(key)] if isinstance(place, list) else place[key]
    place[int(last) if isinstance(place, list) else last] = value
    return data


@pytest.fixture(scope="module")
def demo() -> dict[str, AircraftRecord]:
    return load_records(DEMO)


@pytest.mark.parametrize(
    ("record_id", "speed_kt", "ratio"),
    [
        ("vessim-two", 68.0, 9.0),
        ("torvand-six", 105.0, 10.0),
        ("quellmar-nine", 114.0, 15.0),
        ("ilvenna-sail", 54.0, 25.0),
    ],
)
def test_demo_magnitudes(
    demo: dict[str, AircraftRecord], record_id: str, speed_kt: float, ratio: float
) -> None:
    # Common practice: a two-seat trainer glides near 9:1 at 68 kt, a heavy retractable single 10:1
    # at 105 kt, a single turboprop feathered 15:1 at 114 kt, a motor glider 25:1. Tolerance:
    # rounding, the record states these figures.
    polar = demo[record_id].polar()
    assert polar.best_glide_eas_mps / KT_MPS == pytest.approx(speed_kt)
    assert polar.ratio == pytest.approx(ratio)


def test_demo_has_a_record_in_each_form(demo: dict[str, AircraftRecord]) -> None:
    assert len(demo) >= 4
    assert {record.polar().form for record in demo.values()} == {"manual", "drag"}


def test_demo_turboprop_unfeathered_is_about_half(demo: dict[str, AircraftRecord]) -> None:
    # Common practice: about 8:1 unfeathered against 15:1 feathered. Tolerance: "about".
    record = demo["quellmar-nine"]
    assert record.propeller_states[0] == "feathered"
    assert record.polar(propeller="windmilling").ratio == pytest.approx(8.0, rel=0.05)


def test_demo_idle_is_never_the_default(demo: dict[str, AircraftRecord]) -> None:
    for record in demo.values():
        assert record.propeller_states[0] != "idle"
        assert record.polar() == record.polar(propeller=record.propeller_states[0])


def test_demo_states_every_source(demo: dict[str, AircraftRecord]) -> None:
    for record in demo.values():
        states = len(record.propeller_states) + len(record.configurations)
        assert len(record.sources) == 3 + states
        assert all("Invented" in text or "The figures of" in text for text in record.sources)


def test_speeds_scale_with_the_root_of_mass(demo: dict[str, AircraftRecord]) -> None:
    # Derived: V ~ sqrt(W), ratio unchanged; at 80 % of the mass 0.894 of the speed.
    record = demo["quellmar-nine"]
    full, light = record.polar(), record.polar(0.8 * record.mass_max_kg)
    factor = math.sqrt(0.8)
    assert factor == pytest.approx(0.894, abs=5e-4)
    assert light.best_glide_eas_mps == pytest.approx(factor * full.best_glide_eas_mps)
    assert light.stall_eas_mps == pytest.approx(factor * full.stall_eas_mps)
    assert light.ratio == full.ratio


@pytest.mark.parametrize("data", [MANUAL, drag_form()], ids=["manual", "drag"])
def test_a_drag_factor_changes_ratio_and_speed(data: dict[str, Any]) -> None:
    # Derived: CD0 times f gives E / sqrt(f) and v_bg / f^(1/4). Tolerance of the drag form's
    # speed: cos(gamma), 0.2 %.
    record = load_record(data)
    base, stopped = record.polar(), record.polar(propeller="stopped")
    assert stopped.ratio == pytest.approx(base.ratio / math.sqrt(0.81), rel=1e-8)
    expected = base.best_glide_eas_mps / 0.81**0.25
    assert stopped.best_glide_eas_mps == pytest.approx(expected, rel=2e-3)
    assert stopped.stall_eas_mps == base.stall_eas_mps


@pytest.mark.parametrize("data", [MANUAL, drag_form()], ids=["manual", "drag"])
def test_a_measured_pair_is_kept(data: dict[str, Any]) -> None:
    feathered = load_record(data).polar(propeller="feathered")
    assert feathered.best_glide_eas_mps / KT_MPS == pytest.approx(74.0, rel=1e-9)
    assert feathered.ratio == pytest.approx(11.0, rel=1e-9)


def test_states_of_propeller_and_configuration_add_their_drag() -> None:
    # Derived: CD0 (1 + (0.81 - 1) + (1.5 - 1)) = 1.31 CD0 for a stopped propeller with flaps.
    polar = load_record(MANUAL).polar(propeller="stopped", configuration="flaps")
    assert polar.ratio == pytest.approx(9.0 / math.sqrt(1.31), rel=1e-8)
    assert polar.best_glide_eas_mps / KT_MPS == pytest.approx(70.0 / 1.31**0.25)
    assert polar.stall_eas_mps / KT_MPS == pytest.approx(40.0)


def test_two_measured_pairs_add_what_each_changes() -> None:
    # Derived: drag = a V^2 + b / V^2 with a = 1 / (2 E v^2), b = v^2 / (2 E) of each pair; then
    # E = 1 / (2 sqrt(a b)) and v = (b / a)^(1/4).
    flaps = {"name": "flaps", "best_glide_eas_kt": 62, "ratio": 7, "source": "invented"}
    polar = load_record(changed("configuration.1", flaps)).polar(None, "feathered", "flaps")
    a = (1 / (11 * 74**2) + 1 / (7 * 62**2) - 1 / (9 * 70**2)) / 2
    b = (74**2 / 11 + 62**2 / 7 - 70**2 / 9) / 2
    assert polar.ratio == pytest.approx(1 / (2 * math.sqrt(a * b)), rel=1e-8)
    assert polar.best_glide_eas_mps / KT_MPS == pytest.approx((b / a) ** 0.25)


def test_mass_of_each_figure_is_its_own() -> None:
    # Derived: speeds given at 700 and 600 kg are scaled from those masses to 800 kg.
    data = changed("speeds.stall_mass_kg", 600, changed("glide.mass_kg", 700))
    polar = load_record(data).polar(800.0)
    assert polar.best_glide_eas_mps / KT_MPS == pytest.approx(70.0 * math.sqrt(800.0 / 700.0))
    assert polar.stall_eas_mps / KT_MPS == pytest.approx(45.0 * math.sqrt(800.0 / 600.0))


def test_defaults_are_maximum_mass_and_the_first_states() -> None:
    record = load_record(MANUAL)
    assert record.id == "inline"
    assert record.polar() == record.polar(800.0, "windmilling", "clean")
    assert record.propeller_states == ("windmilling", "stopped", "feathered", "idle")
    assert record.configurations == ("clean", "flaps")
    assert record.maximum_speed_eas_mps == pytest.approx(120.0 * KT_MPS)


@pytest.mark.parametrize(
    ("arguments", "field"),
    [
        ({"mass_kg": 499.0}, "mass_kg"),
        ({"mass_kg": 801.0}, "mass_kg"),
        ({"mass_kg": math.nan}, "mass_kg"),
        ({"propeller": "gone"}, "propeller"),
        ({"configuration": "gear"}, "configuration"),
    ],
)
def test_what_the_record_does_not_know_is_refused(arguments: dict[str, Any], field: str) -> None:
    with pytest.raises(InputError) as caught:
        load_record(MANUAL).polar(**arguments)
    assert caught.value.field == field
    assert caught.value.allowed


FAULTS: list[tuple[dict[str, Any], str, str]] = [
    (changed("glide.ratio", 2.99), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", 70.1), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", math.nan), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", math.inf), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", "9"), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", True), "glide.ratio", "3 to 70"),
    (changed("glide.ratio", 10**400), "glide.ratio", "3 to 70"),
    (changed("glide.best_glide_eas_kt", 401), "glide.best_glide_eas_kt", "15 to 400"),
    (changed("glide.mass_kg", 801), "glide.mass_kg", "500 to 800"),
    (changed("glide.cd0", 0.04), "glide.best_glide_eas_kt", "cd0"),
    (changed("glide.speed", 3), "glide.speed", "best_glide_eas_kt"),
    (changed("glide.propeller", "feathered"), "propeller.0", "drag_factor"),
    (changed("glide.propeller", "other"), "glide.propeller", "listed"),
    (changed("glide.source", ""), "glide.source", "characters"),
    (changed("glide.source", "a\nb"), "glide.source", "characters"),
    (changed("glide", 5), "glide", "table"),
    (changed("mass.minimum_kg", 801), "mass.minimum_kg", "mass.maximum_kg"),
    (changed("mass.maximum_kg", 50_001), "mass.maximum_kg", "50 to 50000"),
    (changed("speeds.stall_eas_kt", 70), "glide", "stall"),
    (changed("speeds.stall_mass_kg", 400), "speeds.stall_mass_kg", "500 to 800"),
    (changed("speeds.maximum_glide_eas_kt", 69), "speeds.maximum_glide_eas_kt", "best-glide"),
    (changed("propeller", {}), "propeller", "list"),
    (changed("propeller", []), "propeller", "1 to 4"),
    (changed("propeller.1", 3), "propeller.1", "table"),
    (changed("propeller.1.state", "turning"), "propeller.1.state", "windmilling"),
    (changed("propeller.1.state", "idle"), "propeller.3.state", "distinct"),
    (changed("propeller.1.drag_factor", 0.1), "propeller.1.drag_factor", "0.2 to 20"),
    (changed("propeller.1.drag_factor", 15), "propeller.1", "3 to 70"),
    (changed("propeller.1.ratio", 9), "propeller.1.drag_factor", "absent"),
    (changed("propeller.2.ratio", None), "propeller.2.ratio", "3 to 70"),
    (changed("configuration.0.name", "Clean"), "configuration.0.name", "lower-case"),
    (changed("configuration.1.stall_eas_kt", 64), "configuration.1", "stall"),
    (changed("name", "x" * 81), "name", "1 to 80"),
    (changed("name", 7), "name", "1 to 80"),
    (changed("extra", 1), "extra", "name, mass"),
    (changed("glide.cd0", 0.6, drag_form()), "glide.cd0", "0.002 to 0.5"),
    (changed("glide.ratio", 9, drag_form()), "glide.ratio", "cd0, k"),
]


@pytest.mark.parametrize(("data", "field", "allowed"), FAULTS)
def test_a_fault_is_named_with_what_is_allowed(
    data: dict[str, Any], field: str, allowed: str
) -> None:
    with pytest.raises(RecordError) as caught:
        load_record(data)
    assert caught.value.field == field
    assert allowed in (caught.value.allowed or "")


def test_idle_cannot_be_the_first_state() -> None:
    data = copy.deepcopy(MANUAL)
    data["propeller"].insert(0, data["propeller"].pop())
    with pytest.raises(RecordError) as caught:
        load_record(data)
    assert caught.value.field == "propeller.0.state"
    assert "idle" not in (caught.value.allowed or "")


def test_each_missing_key_is_named() -> None:
    for section in ("mass", "speeds", "glide"):
        for key in MANUAL[section]:
            data = copy.deepcopy(MANUAL)
            del data[section][key]
            with pytest.raises(RecordError) as caught:
                load_record(data)
            assert caught.value.field == f"{section}.{key}"


def test_an_odd_key_is_not_repeated() -> None:
    with pytest.raises(RecordError) as caught:
        load_record(changed("glide.<script>\x1b", 1))
    assert caught.value.field == "glide"
    assert "script" not in str(caught.value)


def test_a_measured_pair_and_a_factor_that_leave_no_drag_are_refused() -> None:
    # Derived: parasite drag 9/70 (70/88)^2 of the reference for the pair, less 0.8 for the factor.
    data = changed("propeller.2", {
        "state": "feathered", "best_glide_eas_kt": 88, "ratio": 70, "source": "invented",
    })  # fmt: skip
    data = changed("configuration.1.drag_factor", 0.2, data)
    with pytest.raises(RecordError):
        load_record(data)


ANY_VALUE = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8) | st.binary(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(max_size=8), inner),
    max_leaves=8,
)
PATHS = [
    *MANUAL,
    *(f"{section}.{key}" for section in ("mass", "speeds", "glide") for key in MANUAL[section]),
    *(f"propeller.{i}.{key}" for i in (1, 2) for key in MANUAL["propeller"][i]),
    *(f"configuration.1.{key}" for key in MANUAL["configuration"][1]),
]


@settings(max_examples=200, deadline=None)
@given(ANY_VALUE)
def test_no_content_does_more_than_raise_a_record_error(data: Any) -> None:
    with pytest.raises(RecordError):
        load_record(data)


@settings(max_examples=300, deadline=None)
@given(
    path=st.sampled_from(PATHS),
    value=ANY_VALUE | st.floats(0.01, 1000.0),
    base=st.sampled_from([MANUAL, drag_form()]),
)
def test_any_one_value_is_refused_or_glides(path: str, value: Any, base: dict[str, Any]) -> None:
    try:
        record = load_record(changed(path, value, base))
    except RecordError:
        return
    for mass_kg in (record.mass_min_kg, record.mass_max_kg):
        for propeller in record.propeller_states:
            for configuration in record.configurations:
                polar = record.polar(mass_kg, propeller, configuration)
                assert 3.0 <= polar.ratio <= 70.0
                assert polar.stall_eas_mps < polar.best_glide_eas_mps
                tangent = float(glide_tangent(polar, polar.best_glide_eas_mps))
                assert tangent == pytest.approx(1.0 / polar.ratio, rel=1e-6)


def test_load_records_by_stem_and_in_order(tmp_path: Path) -> None:
    text = (DEMO / "vessim-two.toml").read_text(encoding="utf-8")
    for stem in ("b-two", "a_one"):
        (tmp_path / f"{stem}.toml").write_text(text, encoding="utf-8")
    (tmp_path / "notes.txt").write_text("no record", encoding="utf-8")
    records = load_records(tmp_path)
    assert list(records) == ["a_one", "b-two"]
    assert records["b-two"].id == "b-two"


@pytest.mark.parametrize(
    "content",
    [
        b"ratio = ",
        b"\xff\xfe\x00",
        b"x = " + b"[" * 20_000,
        b"name = 5",
        b"x = nan\n" + b"#" * 70_000,
        b"d = 2024-99-99",
        b"",
    ],
    ids=["cut", "not text", "deep", "wrong type", "large", "no date", "empty"],
)
def test_a_faulty_file_is_named(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "broken.toml").write_bytes(content)
    with pytest.raises(RecordError) as caught:
        load_records(tmp_path)
    assert str(caught.value).startswith("broken.toml: ")
    assert str(tmp_path) not in str(caught.value)


def test_a_file_name_that_is_no_id_is_refused(tmp_path: Path) -> None:
    text = (DEMO / "vessim-two.toml").read_text(encoding="utf-8")
    (tmp_path / "two words.toml").write_text(text, encoding="utf-8")
    with pytest.raises(RecordError):
        load_records(tmp_path)


def test_a_missing_file_or_a_folder_in_its_place_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RecordError):
        load_record(tmp_path / "none.toml")
    (tmp_path / "folder.toml").mkdir()
    with pytest.raises(RecordError):
        load_records(tmp_path)
