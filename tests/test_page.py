"""The page in a real browser: it draws, follows the hand, says why, and forgets nothing."""

from __future__ import annotations

import json
import re
from typing import Any

import pytest

from tests.conftest import NARROW, WIDE, Opener

pytestmark = pytest.mark.browser

EDGE = "#map path.any"
COUNT_REQUESTS = """
    window.jobs = [];
    window.most = 0;
    let flying = 0;
    const plain = window.fetch;
    window.fetch = async (path, options) => {
      if (path !== "/api/footprint") return plain(path, options);
      window.jobs.push(JSON.parse(options.body).detail);
      window.most = Math.max(window.most, ++flying);
      try { return await plain(path, options); } finally { flying -= 1; }
    };
"""
REFUSED = "status of 422"  # what the browser itself says of a refused request


def outline(page: Any) -> str:
    """Return the drawn outline."""
    return str(page.get_attribute(EDGE, "d"))


def middle(page: Any, selector: str) -> tuple[float, float]:
    """Return the middle of an element on the screen [px]."""
    box = page.locator(selector).bounding_box()
    return box["x"] + box["width"] / 2, box["y"] + box["height"] / 2


def settled(page: Any) -> None:
    """Wait for the fine answer to the inputs that stand."""
    page.wait_for_selector("#chart[data-detail=fine]:not(.stale)")


def change(page: Any, name: str, value: str) -> None:
    """Enter a value and leave the field."""
    page.locator(f"[name={name}]").fill(value)
    page.locator(f"[name={name}]").blur()


@pytest.mark.parametrize("size", [WIDE, NARROW])
def test_it_draws(open_page: Opener, size: tuple[int, int]) -> None:
    page = open_page(size=size).page
    assert len(outline(page)) > 100
    assert page.locator("#map path.direct").count() == 1
    assert page.locator("#map path.shade").count() == 1
    assert page.locator("img.relief, .relief img").count() > 0
    assert page.locator(".site .sign").count() > 3
    assert "km²" in page.inner_text("#headline")
    assert "Planning aid" in page.inner_text("#cautions summary")
    assert "Terrain:" in page.inner_text("#credit")


def test_every_figure_has_a_unit(open_page: Opener) -> None:
    page = open_page().page
    figures = page.locator("#figures dd").all_inner_texts()
    assert len(figures) >= 8
    unit = re.compile(r"\d\s(kt EAS|: 1|ft/min|ft|s|km²|m)$|\d\snm on \d{3}°\strue$")
    assert [text for text in figures if not unit.search(text)] == []
    names = page.locator("#figures dt").all_inner_texts()
    assert any(re.search(r"Best-glide speed at [\d,]+\skg", name) for name in names)
    assert any("180° turn at 30° bank" in name for name in names)


def test_dragging_follows_coarse_then_fine(open_page: Opener) -> None:
    page = open_page(prepare=lambda new: new.add_init_script(COUNT_REQUESTS)).page
    page.evaluate("window.jobs.length = 0")
    first = outline(page)
    x, y = middle(page, ".aeroplane")
    page.mouse.move(x, y)
    page.mouse.down()
    for step in range(1, 5):
        page.mouse.move(x - 12 * step, y + 8 * step)
    page.wait_for_selector("#chart[data-detail=coarse]")
    assert "coarse" in page.inner_text("#coarse").lower()
    assert re.search(r"\d+\sm cells", page.inner_text("#coarse"))
    coarse = outline(page)
    assert coarse != first
    page.mouse.up()
    settled(page)
    assert not page.is_visible("#coarse")
    assert outline(page) not in {first, coarse}
    jobs = page.evaluate("window.jobs")
    assert jobs[0] == "coarse"
    assert jobs[-1] == "fine"
    assert jobs.count("fine") == 1
    assert page.evaluate("window.most") == 1  # at most one footprint is asked for at a time


def test_the_last_coarse_answer_belongs_to_where_the_hand_rests(open_page: Opener) -> None:
    page = open_page().page
    asked: list[list[float]] = []
    page.on(
        "request",
        lambda request: (
            asked.append(request.post_data_json["position"])
            if request.url.endswith("/api/footprint")
            else None
        ),
    )
    x, y = middle(page, ".aeroplane")
    page.mouse.move(x, y)
    page.mouse.down()
    for step in range(1, 5):
        page.mouse.move(x + 10 * step, y)
    page.wait_for_selector("#chart[data-detail=coarse]")
    page.wait_for_load_state("networkidle")
    shown = page.input_value("[name=longitude_deg]")
    page.mouse.up()
    settled(page)
    # The field shows four decimals: half a unit of the last.
    assert asked[-1][0] == pytest.approx(float(shown), abs=0.5e-4)
    assert asked[-2][0] == pytest.approx(float(shown), abs=0.5e-4)


def test_turning_the_knob_changes_the_track(open_page: Opener) -> None:
    page = open_page().page
    first = outline(page)
    x, y = middle(page, ".aeroplane")
    page.mouse.move(*middle(page, ".knob"))
    page.mouse.down()
    page.mouse.move(x + 40, y - 40)
    page.mouse.move(x + 90, y - 2)
    page.mouse.up()
    settled(page)
    # Derived: atan2(90, 2) is 88.7 degrees; a pixel is 0.6 degrees at that distance.
    assert float(page.input_value("[name=track_deg]")) == pytest.approx(89, abs=2)
    assert outline(page) != first


def test_a_click_says_why_it_is_out_of_range(open_page: Opener) -> None:
    page = open_page("").page
    change(page, "altitude_ft", "3000")
    settled(page)
    box = page.locator("#map").bounding_box()
    page.mouse.click(box["x"] + box["width"] - 40, box["y"] + box["height"] - 60)
    page.wait_for_selector("#asked", state="visible")
    words = page.inner_text("#asked")
    assert "Out of modelled range" in words
    assert len(page.inner_text("#asked .reason")) > 15
    assert page.locator("#asked svg.section path.ground").count() == 1
    assert page.locator("#map path.target").count() == 1
    assert re.search(r"Distance\s+[\d.]+\snm", words)


def test_a_site_in_range_is_reached_by_a_drawn_path(open_page: Opener) -> None:
    page = open_page().page
    entry = page.locator("#site-lists ul").first.locator("button").first
    name = entry.locator(".title").inner_text()
    assert re.search(r"surplus [\d,]+\sft", entry.inner_text())
    entry.click()
    page.wait_for_selector("#asked", state="visible")
    words = page.inner_text("#asked")
    assert name in words
    assert "ithin modelled gliding range" in words
    assert page.locator("#map path.way").count() == 1
    assert "to=" in page.evaluate("() => new Promise(r => setTimeout(() => r(location.hash), 400))")


def test_a_site_out_of_range_has_its_reason(open_page: Opener) -> None:
    page = open_page().page
    change(page, "altitude_ft", "2500")
    settled(page)
    out = page.locator("#site-lists ul").last.locator("button")
    assert out.count() > 0
    assert all(len(text) > 20 for text in out.locator(".more").all_inner_texts())


def test_an_error_is_shown_in_words(open_page: Opener) -> None:
    page = open_page(expected=REFUSED).page
    change(page, "altitude_ft", "10")
    page.wait_for_selector("#fault", state="visible")
    words = page.inner_text("#fault")
    assert "True altitude" in words
    assert "ground" in words
    assert "Allowed" in words
    assert page.get_attribute("[name=altitude_ft]", "aria-invalid") == "true"
    assert page.locator(EDGE).count() == 0  # no outline that does not belong to the inputs
    change(page, "altitude_ft", "6000")
    settled(page)
    assert not page.is_visible("#fault")
    assert page.get_attribute("[name=altitude_ft]", "aria-invalid") is None


def test_margins_that_leave_nothing_are_said_in_words(open_page: Opener) -> None:
    page = open_page(expected=REFUSED).page
    change(page, "altitude_ft", "10")
    allowed = re.search(r"above (\d+) ft", page.locator("#fault li").inner_text())
    assert allowed
    # Half the default arrival height of 1000 ft above the ground there.
    change(page, "altitude_ft", str(int(allowed[1]) + 500))
    settled(page)
    assert "leave nothing within modelled range" in page.inner_text("#headline")
    assert "does not mean that no landing is possible" in page.inner_text("#headline")
    assert page.locator(EDGE).count() == 0


def test_wind_levels_are_added_and_taken_away(open_page: Opener) -> None:
    page = open_page().page
    first = page.locator(".wind").count()
    page.click("#more-wind")
    assert page.locator(".wind").count() == first + 1
    change(page, "wind-1-speed_kt", "33")
    page.click(".wind >> nth=0 >> button")
    assert page.input_value("[name=wind-0-speed_kt]") == "33"
    while page.locator(".wind").count() > 0:
        page.click(".wind >> nth=0 >> button")
    assert page.inner_text("#winds") == "Calm at every level."
    settled(page)
    page.wait_for_function("() => location.hash.includes('wind=calm')")


def test_a_field_without_a_number_is_named_at_once(open_page: Opener) -> None:
    page = open_page().page
    asked: list[str] = []
    page.on("request", lambda request: asked.append(request.url))
    change(page, "altitude_ft", "")
    assert page.locator(".wrong").all_inner_texts() == ["Enter a number here."]
    assert [url for url in asked if url.endswith("/api/footprint")] == []


def test_a_silent_service_is_explained(open_page: Opener) -> None:
    page = open_page(expected="ERR_FAILED").page
    page.route("**/api/footprint", lambda route: route.abort())
    change(page, "altitude_ft", "6100")
    page.wait_for_selector("#fault", state="visible")
    assert "does not answer" in page.inner_text("#fault")
    page.unroute("**/api/footprint")
    page.click("#fault button")
    settled(page)
    assert not page.is_visible("#fault")


def test_long_work_is_shown_and_can_be_stopped(open_page: Opener) -> None:
    page = open_page().page
    held: list[Any] = []
    page.route("**/api/footprint", lambda route: held.append(route))
    change(page, "altitude_ft", "6100")
    page.wait_for_selector("#work", state="visible")
    assert re.search(r"Solving, \d+\ss", page.inner_text("#worded"))
    page.click("#stop")
    page.wait_for_selector("#work", state="hidden")
    assert page.inner_text("#headline").startswith("Stopped")
    assert page.locator(EDGE).count() == 0
    assert len(held) == 1
    page.unroute("**/api/footprint")
    page.click("form > .plain")
    settled(page)
    assert "km²" in page.inner_text("#headline")


def test_the_address_restores_the_whole_state(open_page: Opener) -> None:
    page = open_page().page
    change(page, "altitude_ft", "7000")
    change(page, "wind-0-speed_kt", "21")
    page.click("#margins summary")
    change(page, "bank_deg", "45")
    page.select_option("[name=propeller]", index=1)
    page.check("[name=any_track]")
    settled(page)
    page.locator("#site-lists button").first.click()
    page.wait_for_selector("#asked", state="visible")
    page.wait_for_function("() => location.hash.includes('to=')")
    names = page.eval_on_selector_all("#inputs [name]", "all => all.map(one => one.name)")
    read = "all => all.map(one => one.type === 'checkbox' ? one.checked : one.value)"
    before = page.eval_on_selector_all("#inputs [name]", read)
    drawn, headline = outline(page), page.inner_text("#headline")
    again = open_page(page.url).page
    again.wait_for_selector("#asked", state="visible")
    after = again.eval_on_selector_all("#inputs [name]", read)
    assert dict(zip(names, after, strict=True)) == dict(zip(names, before, strict=True))
    assert again.inner_text("#headline") == headline
    assert again.inner_text("#asked h2") == page.inner_text("#asked h2")
    assert outline(again) == drawn


def test_margins_less_safe_than_default_are_bold(open_page: Opener) -> None:
    page = open_page().page
    page.click("#margins summary")
    assert page.locator(".margin.bold [name=bank_deg]").count() == 0
    change(page, "bank_deg", "45")
    settled(page)
    assert page.locator(".margin.bold [name=bank_deg]").count() == 1
    assert "45 degrees instead of 30 degrees" in page.inner_text("#bolds strong")
    weight = page.eval_on_selector("[name=bank_deg]", "one => getComputedStyle(one).fontWeight")
    assert int(weight) >= 700  # Source: CSS Fonts Level 4, section 2.2: 700 is bold
    page.click("#usual")
    settled(page)
    assert not page.is_visible("#bolds")


def test_keys_reach_and_move_the_aeroplane(open_page: Opener) -> None:
    page = open_page().page
    first = outline(page)
    reached = []
    for _ in range(8):
        page.keyboard.press("Tab")
        reached.append(
            page.evaluate("document.activeElement.id || document.activeElement.className")
        )
        if "aeroplane" in reached[-1]:
            break
    assert reached[0] == "skip"
    assert "map" in reached
    assert "aeroplane" in reached[-1]
    before = float(page.input_value("[name=longitude_deg]"))
    for _ in range(3):
        page.keyboard.press("Shift+ArrowRight")
    settled(page)
    assert float(page.input_value("[name=longitude_deg]")) > before
    assert outline(page) != first
    track = float(page.input_value("[name=track_deg]"))
    page.keyboard.press("Tab")
    page.keyboard.press("ArrowRight")
    settled(page)
    assert float(page.input_value("[name=track_deg]")) == (track + 5) % 360
    assert page.get_attribute(".knob", "role") == "slider"


def test_enter_on_the_map_asks_about_its_middle(open_page: Opener) -> None:
    page = open_page().page
    page.focus("#map")
    page.keyboard.press("Enter")
    page.wait_for_selector("#asked", state="visible")
    assert "Bearing" in page.inner_text("#asked")


def test_text_from_files_stays_text(open_page: Opener) -> None:
    evil = '<img src=x onerror="window.caught=1"><script>window.caught=1</script>'

    def poison(route: Any) -> None:
        answer = json.loads(route.fetch().text())
        for record in (
            answer.get("aircraft", []) if isinstance(answer.get("aircraft"), list) else []
        ):
            record["name"] = evil
            record["propeller"][0] = evil
        for file in [*answer.get("terrain", []), *answer.get("data", [])]:
            file["source"] = evil
        sites = answer.get("sites", [])
        for site in sites["features"] if isinstance(sites, dict) else sites:
            (site.get("properties") or site)["name"] = evil
            site["note"] = evil
        if "limits" in answer:
            answer["limits"].append(evil)
        route.fulfill(json=answer)

    def prepare(page: Any) -> None:
        page.route("**/api/catalog", poison)
        page.route("**/api/footprint", poison)

    page = open_page(prepare=prepare).page
    assert page.evaluate("window.caught") is None
    assert page.locator("img[src=x]").count() == 0
    assert evil in page.locator("[name=aircraft] option").first.inner_text()
    assert evil in page.inner_text("#credit")
    assert evil in page.locator(".site .label").first.text_content()
    assert evil in page.inner_text("#site-lists")
    assert evil in page.inner_text("#limits")
