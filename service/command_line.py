"""The command line: serve, or write a footprint without a server. Errors in words, exit codes."""

from __future__ import annotations

import argparse
import json
import logging
import sys
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any, NoReturn

from pydantic import ValidationError

from perf.errors import ModelError, RecordError
from perf.record import load_record
from service import convert
from service.allowed import allowed_at
from service.problems import WORDS
from service.schemas import FootprintRequest
from service.settings import ROOT, Settings, SettingsError, check_data, default_data, default_work

logger = logging.getLogger("engineout")
EXIT_DONE, EXIT_FAILED, EXIT_REFUSED = 0, 1, 2
CASE_FILE_MAX_BYTES = 256_000
NUMBERS: dict[str, str] = {
    "altitude_ft": "true height above mean sea level [ft]",
    "track_deg": "true track at failure [deg]; without it any heading is assumed",
    "mass_kg": "mass [kg]; default the record's maximum",
    "speed_at_failure_kt": "equivalent airspeed at failure [kt]; default the glide speed",
    "isa_offset_c": "temperature above standard [C]",
    "qnh_hpa": "pressure at mean sea level [hPa]",
}
MARGINS: dict[str, str] = {
    "ratio_factor": "share of the record's glide ratio that is used",
    "wind_error_kt": "taken off every track's ground speed [kt]",
    "reaction_s": "flown straight on first [s]",
    "bank_deg": "bank in turns [deg]",
    "clearance_ft": "height kept above the surface on the way [ft]",
    "arrival_height_ft": "height above the place on arrival [ft]",
    "downdraft_fpm": "sinking of the air everywhere [ft/min]",
    "excess_speed_credit": "share of the excess speed that is credited",
}
WORDS_OPTIONS: dict[str, str] = {
    "propeller": "propeller state; default the record's first",
    "configuration": "configuration; default the record's first",
}


class Refused(Exception):  # noqa: N818 - carries sentences for the reader
    """The request is refused; each line is a sentence."""

    def __init__(self, *lines: str) -> None:
        super().__init__()
        self.lines = lines


def option(name: str) -> str:
    """Return the option of a request's field: ``altitude_ft`` gives ``--altitude-ft``."""
    return "--" + name.replace("_", "-")


def _wind_level(text: str) -> dict[str, float]:
    """Read ``ALTITUDE_FT,FROM_DEG,SPEED_KT``."""
    parts = [float(part) for part in text.split(",")]
    if len(parts) != 3:
        raise ValueError
    return dict(zip(("altitude_ft", "from_deg", "speed_kt"), parts, strict=True))


_wind_level.__name__ = "wind level (altitude_ft,from_deg,speed_kt)"


class Place(argparse.Action):
    """Reads a place: ``--position=LON,LAT`` or ``--position LON LAT``."""

    def __call__(
        self, parser: argparse.ArgumentParser, namespace: argparse.Namespace, values: Any,
        option_string: str | None = None,
    ) -> None:  # fmt: skip
        """Keep the two numbers."""
        try:
            lon, lat = (float(part) for part in ",".join(values).split(","))
        except ValueError:
            parser.error(f"argument {option_string}: two numbers are needed, LON,LAT")
        setattr(namespace, self.dest, [lon, lat])


class Parser(argparse.ArgumentParser):
    """A parser that says what is wrong in words on stderr and ends with code 2."""

    def error(self, message: str) -> NoReturn:
        """End with the message."""
        self.exit(EXIT_REFUSED, f"{self.prog}: {message}. See {self.prog} --help.\n")


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of both commands."""
    parser = Parser(prog="python -m service", description="Gliding footprint over real terrain.")
    commands = parser.add_subparsers(dest="command", parser_class=Parser)
    serve = commands.add_parser("serve", help="serve the map page and the HTTP interface")
    serve.add_argument("--host", default="127.0.0.1", help="address to listen on")
    serve.add_argument("--port", type=int, default=8000, help="port to listen on")
    serve.add_argument("--data", type=Path, help="data folder; default ENGINEOUT_DATA or demo_data")
    serve.add_argument("--work", type=Path, help="folder for results worth keeping")
    _add_footprint(commands.add_parser("footprint", help="write a footprint as GeoJSON"))
    return parser


def _add_footprint(parser: argparse.ArgumentParser) -> None:
    """Add an option for each field of the request."""
    parser.add_argument(
        "--data", type=Path, help="data folder; default ENGINEOUT_DATA or demo_data"
    )
    parser.add_argument("--out", type=Path, help="file to write; default standard output")
    parser.add_argument("--case", type=Path, help="file with a request; options come on top of it")
    parser.add_argument(
        "--position", nargs="+", action=Place, metavar="LON,LAT", help="WGS 84 [deg]; or LON LAT"
    )
    parser.add_argument("--aircraft", help="id of a record, or a record's .toml file")
    for name, words in NUMBERS.items():
        parser.add_argument(option(name), type=float, help=words)
    for name, words in WORDS_OPTIONS.items():
        parser.add_argument(option(name), help=words)
    parser.add_argument("--speed-policy", choices=("manual", "wind"))
    parser.add_argument("--detail", choices=("fine", "coarse"))
    parser.add_argument(
        "--wind", action="append", type=_wind_level, metavar="ALTITUDE_FT,FROM_DEG,SPEED_KT",
        help="wind at one level; repeat for more",
    )  # fmt: skip
    margins = parser.add_argument_group("margins")
    for name, words in MARGINS.items():
        margins.add_argument(option(name), type=float, help=words)


def read_case(path: Path) -> dict[str, Any]:
    """Return the request in a file.

    Raises
    ------
    Refused
        The file is missing, too large or no JSON object.
    """
    try:
        with path.open("rb") as file:
            text = file.read(CASE_FILE_MAX_BYTES + 1)
        if len(text) > CASE_FILE_MAX_BYTES:
            raise Refused(f"--case: the file is larger than {CASE_FILE_MAX_BYTES} bytes.")
        case = json.loads(text.decode("utf-8"))
    except OSError:
        raise Refused("--case: there is no such file, or it cannot be read.") from None
    except (ValueError, RecursionError):
        raise Refused("--case: the file is not JSON in UTF-8.") from None
    if not isinstance(case, dict):
        raise Refused("--case: the file must hold one JSON object.")
    return case


def read_record(path: Path) -> dict[str, Any]:
    """Return the keys of a record's file, checked.

    Raises
    ------
    RecordError
        The file is missing or faulty; the field starts with `aircraft`.
    """
    try:
        load_record(path)
    except RecordError as error:
        field = f"aircraft.{error.field}" if error.field else "aircraft"
        raise RecordError(error.detail, field, error.allowed) from None
    return tomllib.loads(path.read_text(encoding="utf-8"))


def request_of(options: argparse.Namespace) -> FootprintRequest:
    """Return the request that the options and the case file make.

    Raises
    ------
    Refused
        A field is missing or not allowed.
    """
    case = read_case(options.case) if options.case else {}
    for name in ("position", "aircraft", "speed_policy", "detail", "wind", *NUMBERS,
                 *WORDS_OPTIONS):  # fmt: skip
        value = getattr(options, name)
        if value is not None:
            case[name] = value
    if isinstance(case.get("aircraft"), str) and case["aircraft"].endswith(".toml"):
        case["aircraft"] = read_record(Path(case["aircraft"]))
    given = {name: getattr(options, name) for name in MARGINS if getattr(options, name) is not None}
    if given:
        held = case.get("margins")
        case["margins"] = {**(held if isinstance(held, dict) else {}), **given}
    try:
        return FootprintRequest.model_validate(case)
    except ValidationError as error:
        raise Refused(*(_line(entry["loc"], entry["type"]) for entry in error.errors())) from None


def _line(parts: Sequence[str | int], kind: str) -> str:
    """Return one fault of a request as a sentence, led by the option's name."""
    names = [part for part in parts if isinstance(part, str)]
    name = names[-1] if names and names[0] == "margins" else (names or ["--case"])[0]
    detail = WORDS.get(kind, "This value is not allowed.")
    allowed = allowed_at(parts)
    return f"{option(name)}: {detail}" + (f" Allowed: {allowed}." if allowed else "")


def _fault(error: ModelError) -> str:
    """Return a domain error as a sentence, led by the option's name."""
    parts = error.field.split(".") if error.field else []
    if isinstance(error, RecordError) and parts[:1] != ["aircraft"] and parts:
        allowed = f" Allowed: {error.allowed}." if error.allowed else ""
        return f"Aircraft record, {error.field}: {error.detail}{allowed}"
    name = parts[-1] if parts[:1] == ["margins"] else "".join(parts[:1])
    lead = f"{option(name)}: " if name else ""
    where = f" ({'.'.join(parts[1:])})" if name == "aircraft" and len(parts) > 1 else ""
    allowed = f" Allowed: {error.allowed}." if error.allowed else ""
    return f"{lead}{error.detail}{where}{allowed}"


def run_footprint(options: argparse.Namespace) -> int:
    """Write the footprint and return the exit code.

    Raises
    ------
    Refused, ModelError, SettingsError
        The request cannot be answered; nothing is written.
    """
    from service.world import load_world  # late: it loads the compiler, `--help` need not wait

    request = request_of(options)
    settings = Settings(data=options.data or default_data())
    check_data(settings)
    world = load_world(settings)
    record, footprint = world.solve(request)
    answer = convert.encode(convert.footprint_json(request, record, footprint)) + b"\n"
    if options.out is None:
        sys.stdout.buffer.write(answer)
        sys.stdout.buffer.flush()
        return EXIT_DONE
    try:
        options.out.write_bytes(answer)
    except OSError:
        raise Refused("--out: the file cannot be written.") from None
    return EXIT_DONE


def run_serve(options: argparse.Namespace) -> int:
    """Serve until told to stop.

    Raises
    ------
    SettingsError, ModelError
        The service cannot start.
    """
    from service.app import create_app
    from service.server import bind, serve

    handler = logging.StreamHandler()
    handler.setFormatter(logging.Formatter("%(message)s"))
    logger.addHandler(handler)
    logger.setLevel(logging.INFO)
    settings = Settings(
        data=options.data or default_data(),
        static=ROOT / "static",
        work=options.work or default_work(),
    )
    check_data(settings)
    with bind(options.host, options.port) as listener:
        app = create_app(settings)
        host = f"[{options.host}]" if ":" in options.host else options.host
        logger.info("Once ready, the page is at http://%s:%d", host, listener.getsockname()[1])
        serve(app, listener)
    return EXIT_DONE


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line and return the exit code: 0 done, 1 failed, 2 refused."""
    words = list(sys.argv[1:] if arguments is None else arguments)
    if not words or (words[0].startswith("-") and words[0] not in ("-h", "--help")):
        words.insert(0, "serve")
    options = build_parser().parse_args(words)
    try:
        return run_footprint(options) if options.command == "footprint" else run_serve(options)
    except Refused as refused:
        lines = list(refused.lines)
    except ModelError as error:
        lines = [_fault(error)]
    except SettingsError as error:
        print(error, file=sys.stderr)
        return EXIT_FAILED
    for line in lines:
        print(line, file=sys.stderr)
    return EXIT_REFUSED
