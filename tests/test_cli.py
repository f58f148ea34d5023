"""The command line: a footprint without a server, errors in words, exit codes."""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
from pathlib import Path
from socket import socket
from typing import Any

import pytest
from starlette.applications import Starlette

from service import answers, command_line, world
from service.command_line import EXIT_DONE, EXIT_FAILED, EXIT_REFUSED, main
from service.schemas import FootprintRequest, MarginsRequest
from tests.service_support import MIDDLE, REQUEST, stand_in, write_data, write_static

ROOT = Path(__file__).resolve().parent.parent
LON, LAT = (str(value) for value in MIDDLE)


@pytest.fixture
def data(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Return a data folder; footprints are answered by the stand-in."""
    folder = write_data(tmp_path / "data")
    monkeypatch.setenv("ENGINEOUT_DATA", str(folder))
    load = world.load_world

    def loaded(settings: Any) -> Any:
        found = load(settings)
        return world.World(settings, found.store, found.records, found.sites, stand_in)

    monkeypatch.setattr(world, "load_world", loaded)
    return folder


def run(capsys: Any, *words: str) -> tuple[int, str, str]:
    code = main(["footprint", *words])
    out, err = capsys.readouterr()
    return code, out, err


def case_words() -> list[str]:
    return ["--position", LON, LAT, "--altitude-ft", "2500", "--aircraft", "test-two"]


def test_a_footprint_goes_to_standard_output(data: Path, capsys: Any) -> None:
    code, out, err = run(capsys, *case_words(), "--track-deg", "90")
    assert (code, err) == (EXIT_DONE, "")
    answer = answers.FootprintAnswer.model_validate(json.loads(out))
    assert answer.inputs.track_deg == 90


def test_a_position_may_be_one_word_or_two(data: Path, capsys: Any) -> None:
    words = ["--altitude-ft", "2500", "--aircraft", "test-two"]
    code, out, _ = run(capsys, f"--position={LON},{LAT}", *words)
    assert code == EXIT_DONE
    assert run(capsys, "--position", LON, LAT, *words)[1] == out
    for faulty in ("1", "1,2,3", "a,b"):
        with pytest.raises(SystemExit) as ended:
            main(["footprint", f"--position={faulty}", *words])
        assert ended.value.code == EXIT_REFUSED
        assert "--position: two numbers" in capsys.readouterr().err


def test_every_field_of_a_request_is_an_option(data: Path, capsys: Any) -> None:
    code, out, _ = run(
        capsys, *case_words(), "--mass-kg", "600", "--propeller", "stopped",
        "--configuration", "clean", "--speed-policy", "wind", "--speed-at-failure-kt", "80",
        "--wind", "0,270,12", "--wind", "5000,280,25.5", "--isa-offset-c", "-10",
        "--qnh-hpa", "1000", "--detail", "coarse", "--ratio-factor", "0.8",
        "--wind-error-kt", "8", "--reaction-s", "5", "--bank-deg", "25", "--clearance-ft", "300",
        "--arrival-height-ft", "900", "--downdraft-fpm", "100", "--excess-speed-credit", "0.5",
    )  # fmt: skip
    assert code == EXIT_DONE
    inputs = json.loads(out)["inputs"]
    assert inputs["wind"][1] == {"altitude_ft": 5000, "from_deg": 280, "speed_kt": 25.5}
    assert (inputs["mass_kg"], inputs["propeller"], inputs["detail"]) == (600, "stopped", "coarse")
    assert inputs["margins"]["downdraft_fpm"] == 100
    help_text = _help()
    for name in (*FootprintRequest.model_fields, *MarginsRequest.model_fields):
        if name != "margins":
            assert command_line.option(name) in help_text


def _help() -> str:
    parser = command_line.build_parser()
    commands = next(
        action for action in parser._actions if isinstance(action, argparse._SubParsersAction)
    )
    return str(commands.choices["footprint"].format_help())


def test_a_case_file_with_options_on_top(data: Path, tmp_path: Path, capsys: Any) -> None:
    case, out = tmp_path / "case.json", tmp_path / "out.geojson"
    case.write_text(json.dumps({**REQUEST, "margins": {"bank_deg": 45}}), encoding="utf-8")
    code, printed, err = run(capsys, "--case", str(case), "--clearance-ft", "300", "--out",
                             str(out))  # fmt: skip
    assert (code, printed, err) == (EXIT_DONE, "", "")
    inputs = json.loads(out.read_text(encoding="utf-8"))["inputs"]
    assert (inputs["margins"]["bank_deg"], inputs["margins"]["clearance_ft"]) == (45, 300)


def test_a_record_of_ones_own(data: Path, tmp_path: Path, capsys: Any) -> None:
    own = tmp_path / "own.toml"
    text = (data / "aircraft" / "test-two.toml").read_text(encoding="utf-8")
    own.write_text(text.replace("ratio = 9.0", "ratio = 12.0"), encoding="utf-8")
    words = ["--position", LON, LAT, "--altitude-ft", "2500", "--aircraft", str(own)]
    code, out, _ = run(capsys, *words)
    assert code == EXIT_DONE
    assert str(tmp_path) not in out  # the record itself stands in the inputs, not its path
    assert json.loads(out)["inputs"]["aircraft"]["glide"]["ratio"] == 12.0


FAULTS: list[tuple[list[str], str]] = [
    ([], "--position: This field is required."),
    ([*case_words(), "--altitude-ft", "100"], "--altitude-ft: The altitude is at or below"),
    ([*case_words(), "--altitude-ft", "60001"], "--altitude-ft: This number is too large. Allowed"),
    ([*case_words(), "--altitude-ft", "nan"], "--altitude-ft: This number is not finite."),
    ([*case_words(), "--position", "0", "0"], "--position: There is no terrain"),
    ([*case_words(), "--position", "0", "81"], "--position: This number is too large."),
    ([*case_words(), "--aircraft", "none"], "--aircraft: No aircraft record has this id. Allowed"),
    ([*case_words(), "--aircraft", "none.toml"], "--aircraft: "),
    ([*case_words(), "--mass-kg", "499"], "--mass-kg: The mass is outside"),
    ([*case_words(), "--bank-deg", "61"], "--bank-deg: This number is too large. Allowed: 5 to 60"),
    ([*case_words(), "--wind", "0,0,251"], "--wind: This number is too large. Allowed: 0 to 250"),
    ([*case_words(), "--wind", "0,0,9", "--wind", "0,9,9"], "--wind: Two wind levels"),
    (["--case", "none.json"], "--case: there is no such file"),
]


@pytest.mark.parametrize(("words", "start"), FAULTS, ids=lambda value: str(value)[-30:])
def test_a_fault_is_said_in_words(data: Path, capsys: Any, words: list[str], start: str) -> None:
    code, out, err = run(capsys, *words)
    assert (code, out) == (EXIT_REFUSED, "")
    assert err.startswith(start)
    assert "Traceback" not in err


@pytest.mark.parametrize("text", ["{", "[]", '{"x": 1}', "\ufeff{}"])
def test_a_case_file_that_is_no_request(data: Path, tmp_path: Path, capsys: Any, text: str) -> None:
    case = tmp_path / "case.json"
    case.write_text(text, encoding="utf-8")
    code, out, err = run(capsys, "--case", str(case))
    assert (code, out) == (EXIT_REFUSED, "")
    assert err


def test_a_case_file_is_read_no_farther_than_its_limit(data: Path, capsys: Any) -> None:
    code, _, err = run(capsys, "--case", "/dev/zero")  # endless, and says that it has no size
    assert (code, err) == (EXIT_REFUSED, "--case: the file is larger than 256000 bytes.\n")


def test_an_output_that_cannot_be_written(data: Path, tmp_path: Path, capsys: Any) -> None:
    code, _, err = run(capsys, *case_words(), "--out", str(tmp_path / "none" / "out.geojson"))
    assert (code, err) == (EXIT_REFUSED, "--out: the file cannot be written.\n")


def test_usage_errors_end_with_code_2(capsys: Any) -> None:
    for words in (["footprint", "--wind", "0,0"], ["fly"], ["serve", "--port", "x"]):
        with pytest.raises(SystemExit) as ended:
            main(words)
        assert ended.value.code == EXIT_REFUSED
        assert "--help" in capsys.readouterr().err


def test_a_missing_data_folder_is_an_error_in_words(tmp_path: Path, capsys: Any) -> None:
    code, out, err = run(capsys, *case_words(), "--data", str(tmp_path / "none"))
    assert (code, out) == (EXIT_FAILED, "")
    assert "--data" in err
    assert main(["serve", "--data", str(tmp_path / "none")]) == EXIT_FAILED


@pytest.mark.parametrize("words", [[], ["serve"], ["--port", "8123"], ["serve", "--host", "::1"]])
def test_serving_is_the_default(
    data: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, words: list[str]
) -> None:
    served: list[Any] = []
    app = Starlette()
    monkeypatch.setattr("service.app.create_app", lambda settings: served.append(settings) or app)
    monkeypatch.setattr("service.server.bind", lambda *address: served.append(address) or socket())
    monkeypatch.setattr("service.server.serve", lambda app, listener: None)
    write_static(tmp_path / "static")
    assert main(words) == EXIT_DONE
    assert served[1].data == data
    host, port = "::1" if "--host" in words else "127.0.0.1", 8123 if "--port" in words else 8000
    assert served[0] == (host, port)


def test_an_address_that_cannot_be_taken_is_said_at_once(data: Path, capsys: Any) -> None:
    with socket() as taken:
        taken.bind(("127.0.0.1", 0))
        taken.listen()
        for port in (taken.getsockname()[1], 65536, -1):
            assert main(["serve", "--port", str(port)]) == EXIT_FAILED
            out, err = capsys.readouterr()
            assert out == ""
            assert err.startswith("The service cannot listen on 127.0.0.1, port ")


def test_the_module_runs_as_a_program(tmp_path: Path) -> None:
    command = [sys.executable, "-m", "service", "footprint", "--data", str(tmp_path)]
    done = subprocess.run([*command, *case_words()], cwd=ROOT, capture_output=True, check=False)
    assert done.returncode == EXIT_FAILED
    assert b"terrain/" in done.stderr
    assert done.stdout == b""
