"""The page's pure modules, run in the browser without the page around them."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest

from tests.conftest import opening

pytestmark = pytest.mark.browser


@pytest.fixture(scope="module")
def runner(browser: Any, server_url: str) -> Iterator[Any]:
    """Yield a function that runs a script; in it `use(name)` gives a module of the page."""
    with opening(browser, server_url) as opened:
        page = opened().page

        def run(script: str, argument: Any = None) -> Any:
            return page.evaluate(
                "async (given) => { const use = name => import(`/static/js/${name}.js`);"
                + script
                + "}",
                argument,
            )

        yield run


QUEUE = """
  const { LatestQueue } = await use("queue");
  const open = [], got = [], failed = [];
  const run = (job, signal) => new Promise((resolve, reject) => {
    open.push({ job, resolve: () => resolve(job) });
    signal.addEventListener("abort", () => reject(new Error("stopped")));
  });
  const queue = new LatestQueue(run, job => got.push(job), job => failed.push(job));
  const rest = () => new Promise(done => setTimeout(done, 0));
"""


def test_only_the_newest_of_those_that_wait_is_run(runner: Any) -> None:
    started, got, failed = runner(
        QUEUE
        + """
        for (const job of [1, 2, 3, 4]) queue.push(job);
        await rest();
        open[0].resolve();
        await rest();
        open[1].resolve();
        await rest();
        return [open.map(one => one.job), got, failed];
        """
    )
    assert started == [1, 4]  # one at a time, and 2 and 3 are forgotten
    assert got == [1, 4]
    assert failed == []


def test_an_interrupted_answer_is_never_delivered(runner: Any) -> None:
    started, got, failed, busy = runner(
        QUEUE
        + """
        queue.push("coarse");
        queue.push("coarser");
        queue.push("fine", true);
        await rest();
        for (const one of open) one.resolve();
        await rest();
        return [open.map(one => one.job), got, failed, queue.busy];
        """
    )
    assert started == ["coarse", "fine"]
    assert got == ["fine"]
    assert failed == []
    assert busy is False


def test_a_stopped_queue_delivers_nothing(runner: Any) -> None:
    got, failed, busy = runner(
        QUEUE
        + """
        queue.push(1);
        queue.push(2);
        queue.stop();
        await rest();
        return [got, failed, queue.busy];
        """
    )
    assert (got, failed, busy) == ([], [], False)


STATE = {
    "latitude_deg": -43.99733,
    "longitude_deg": 179.99999,
    "altitude_ft": 6543.5,
    "track_deg": None,
    "aircraft": "a&b=c#d",
    "mass_kg": 701.25,
    "propeller": "stopped",
    "configuration": "flaps half",
    "speed_policy": "wind",
    "wind": [
        {"altitude_ft": -500, "from_deg": 0, "speed_kt": 0},
        {"altitude_ft": 9000.5, "from_deg": 359.5, "speed_kt": 33},
    ],
    "isa_offset_c": -12.5,
    "qnh_hpa": 998,
    "margins": {"bank_deg": 45, "ratio_factor": 0.85},
    "to": [-130.01234, -0.5],
    "view": {"latitude": -44, "longitude": 179.5, "zoom": 10.25},
}


def test_the_address_holds_every_part_of_the_state(runner: Any) -> None:
    script = """
        const { fromAddress, toAddress } = await use("state");
        const other = { ...given, latitude_deg: 1, longitude_deg: 2, altitude_ft: 3, track_deg: 4,
          aircraft: "x", mass_kg: 5, propeller: "y", configuration: "z", speed_policy: "manual",
          wind: [], isa_offset_c: 6, qnh_hpa: 7, margins: { clearance_ft: 8 },
          to: null, view: null };
        return fromAddress("#" + toAddress(given), other);
    """
    assert runner(script, STATE) == STATE


@pytest.mark.parametrize(
    "garbled",
    ["", "#", "#alt_ft=NaN&track=&wind=1ft2&view=1_2&to=x", "#alt_ft=1e999&lat=%&m.bank_deg=steep"],
)
def test_a_garbled_address_leaves_the_first_state(runner: Any, garbled: str) -> None:
    script = """
        const { fromAddress } = await use("state");
        return fromAddress(given.text, given.base);
    """
    base = {**STATE, "margins": {}, "to": None, "view": None}
    assert runner(script, {"text": garbled, "base": base}) == base


@pytest.mark.parametrize(
    ("call", "words"),
    [  # Derived: rounding by hand; the unit follows after a space that does not break
        ("feet(6543.5)", "6,544\u00a0ft"),
        ("feet(-0.2)", "0\u00a0ft"),
        ("feet(-1234567)", "\u22121,234,567\u00a0ft"),
        ("feet(null)", "not known"),
        ("feet(NaN)", "not known"),
        ("ratio(8.1)", "8.1\u00a0: 1"),
        ("nauticalMiles(7.06)", "7.1\u00a0nm"),
        ("bearing(359.6)", "000\u00b0\u00a0true"),
        ("bearing(-90)", "270\u00b0\u00a0true"),
        ("surplus(-311)", "short by 311\u00a0ft"),
        ("place(-43.9, 130)", "43.9000\u00b0\u00a0S, 130.0000\u00b0\u00a0E"),
        ("frameLabel(-2640, 'N', 'S')", "44\u00b000\u2032S"),
    ],
)
def test_numbers_leave_with_their_unit(runner: Any, call: str, words: str) -> None:
    assert runner(f'const words = await use("format"); return words.{call};') == words


def test_less_safe_margins_are_found_both_ways(runner: Any) -> None:
    found = runner(
        """
        const { lessSafe } = await use("margins");
        const table = {
          ratio_factor: { default: 0.9, less_safe: "above" },
          wind_error_kt: { default: 6, less_safe: "below" },
          reaction_s: { default: null, less_safe: "below" },
          bank_deg: { default: 30, less_safe: "above" },
          clearance_ft: { default: 200, less_safe: "below" },
          arrival_height_ft: { default: 1000, less_safe: "below" },
        };
        const less = (chosen, turn = 300) =>
          [...lessSafe(chosen, table, { glide: { turn_180_loss_ft: turn } })];
        const judged = (reaction_s, margins_below_default) => [...lessSafe({ reaction_s: 5 }, table,
          { glide: { turn_180_loss_ft: 300 }, inputs: { margins: { reaction_s } },
            margins_below_default })];
        return [
          less({}), less({ ratio_factor: 0.95, wind_error_kt: 8 }), less({ wind_error_kt: 5 }),
          less({ bank_deg: 20, clearance_ft: 300, reaction_s: 12 }), less({ reaction_s: 4 }),
          less({}, 801), less({ arrival_height_ft: 1001 }, 801),
          less({ reaction_s: 3 }), judged(5, ["reaction_s"]), judged(5, []),
          judged(6, ["reaction_s"]),
        ];
        """
    )
    # Derived: the defaults are met, or not; 801 ft plus the 200 ft reserve is 1001 ft. A reaction
    # is less safe below 4 s, or where the answer to that very reaction says so.
    assert found == [
        [],
        ["ratio_factor"],
        ["wind_error_kt"],
        [],
        [],
        ["arrival_height_ft"],
        [],
        ["reaction_s"],
        ["reaction_s"],
        [],
        [],
    ]


def test_a_void_breaks_the_lines_of_a_section(runner: Any) -> None:
    plot = runner(
        """
        const { plot } = await use("profile");
        const point = (along_nm, ground_ft) => ({ along_nm, ground_ft,
          glide_ft: 1000 - 100 * along_nm,
          required_ft: ground_ft === null ? null : ground_ft + 200 });
        const lines = plot(
          [point(0, 0), point(1, 100), point(2, null), point(3, 300), point(4, 500)],
          { left: 0, right: 400, top: 0, bottom: 100 });
        return { surface: lines.surface, glide: lines.glide, voids: lines.voids };
        """
    )
    # Derived: 400 px over 4 nm, 100 px over 1000 ft.
    assert plot["surface"] == "M0.0 100.0L100.0 90.0M300.0 70.0L400.0 50.0"
    assert plot["glide"].count("M") == 1
    assert plot["voids"] == [{"x": 100, "width": 200}]
