"""The page's shape at 1280 and 390 pixels: nothing overlaps, is clipped or is out of reach."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import pytest

from tests.conftest import NARROW, WIDE, Opener, opening

pytestmark = pytest.mark.browser

# Source: WCAG 2.2, success criterion 2.5.5 (enhanced): targets are at least 44 by 44 CSS pixels;
# controls within a sentence are exempt.
TARGET_PX = 44
TARGETS = "button, summary, #inputs select, #inputs input, label.tick, .aeroplane, .knob"

BOX = """all => all.filter(one => one.checkVisibility({visibilityProperty: true})).map(one => {
  const {left, right, top, bottom} = one.getBoundingClientRect();
  const name = String(one.textContent || one.name || one.getAttribute('class')).slice(0, 40);
  return {name, left, right, top, bottom};
})"""
CLIPPED = """all => all.filter(one => one.checkVisibility({visibilityProperty: true})
    && one instanceof HTMLElement && !one.matches('.unseen') && one.children.length === 0
    && one.scrollWidth > one.clientWidth + 1
    && getComputedStyle(one).display !== 'inline').map(one => one.textContent || one.name)"""


def boxes(page: Any, selector: str) -> list[dict[str, Any]]:
    """Return the boxes on the screen of the visible elements [px]."""
    return list(page.eval_on_selector_all(selector, BOX))


def meet(one: dict[str, Any], other: dict[str, Any]) -> bool:
    """Tell whether two boxes share more than half a pixel."""
    wide = min(one["right"], other["right"]) - max(one["left"], other["left"])
    high = min(one["bottom"], other["bottom"]) - max(one["top"], other["top"])
    return bool(wide > 0.5 and high > 0.5)  # half a pixel: borders fall between pixels


def open_all(page: Any) -> None:
    """Open every disclosure of the sheet and ask about a site."""
    page.eval_on_selector_all("#sheet details", "all => all.forEach(one => one.open = true)")
    page.locator("#site-lists button").first.click()
    page.wait_for_selector("#asked", state="visible")


@pytest.fixture(scope="module", params=[WIDE, NARROW], ids=["wide", "narrow"])
def looked(browser: Any, server_url: str, request: pytest.FixtureRequest) -> Iterator[Any]:
    """Yield a page that is only looked at, with every disclosure of its sheet open."""
    with opening(browser, server_url) as opened:
        page = opened(size=request.param).page
        open_all(page)
        page.wait_for_timeout(400)  # the names are laid once the map stands still
        yield page


def test_nothing_runs_over_the_side(looked: Any) -> None:
    page = looked
    for selector in ("html", "body", "#sheet", "#scroll", "#cautions", "#chart"):
        wide, room = page.eval_on_selector(selector, "one => [one.scrollWidth, one.clientWidth]")
        assert wide <= room, selector
    room = boxes(page, "#scroll")[0]
    outside = [
        box["name"]
        for box in boxes(page, "#scroll *:not(.unseen, defs, defs *)")
        if box["left"] < room["left"] - 0.5 or box["right"] > room["right"] + 0.5
    ]
    assert outside == []


def test_no_label_is_clipped(looked: Any) -> None:
    page = looked
    assert page.eval_on_selector_all("#sheet *, #legend *, #credit, #cautions *", CLIPPED) == []
    texts = boxes(page, "#asked svg text") + boxes(page, ".rose svg text")
    frames = boxes(page, "#asked svg.section:not(.key)") + boxes(page, ".rose svg")
    assert len(texts) > 5
    for text in texts:
        assert any(
            text["left"] >= frame["left"] - 1
            and text["right"] <= frame["right"] + 1
            and text["top"] >= frame["top"] - 1
            and text["bottom"] <= frame["bottom"] + 1
            for frame in frames
        ), text["name"]


def test_map_sheet_and_cautions_do_not_overlap(looked: Any) -> None:
    page = looked
    parts = [boxes(page, selector)[0] for selector in ("#chart", "#sheet", "#cautions")]
    for index, one in enumerate(parts):
        for other in parts[index + 1 :]:
            assert not meet(one, other)
    assert all(part["bottom"] <= page.viewport_size["height"] for part in parts)
    assert all(part["right"] <= page.viewport_size["width"] for part in parts)
    tools = [boxes(page, selector)[0] for selector in (".tools", "#legend", "#credit")]
    for index, one in enumerate(tools):
        for other in tools[index + 1 :]:
            assert not meet(one, other)


def test_names_on_the_map_do_not_cover_one_another(looked: Any) -> None:
    page = looked
    names = boxes(page, ".site .label:not(.away)")
    assert len(names) >= 1
    frame = boxes(page, "#chart")[0]
    for index, one in enumerate(names):
        assert one["left"] >= frame["left"], one["name"]
        assert one["right"] <= frame["right"], one["name"]
        for other in names[index + 1 :]:
            assert not meet(one, other), (one["name"], other["name"])


def test_targets_are_large_enough_for_a_finger(looked: Any) -> None:
    page = looked
    small = [
        (box["name"], box["right"] - box["left"], box["bottom"] - box["top"])
        for box in boxes(page, TARGETS)
        if box["right"] - box["left"] < TARGET_PX - 0.5
        or box["bottom"] - box["top"] < TARGET_PX - 0.5
    ]
    assert [one for one in small if one[0] != "any_track"] == []  # that box lies in its label


def test_the_sheet_is_pulled_up_by_hand_and_by_keys(open_page: Opener) -> None:
    page = open_page(size=NARROW).page

    def top() -> float:
        return float(boxes(page, "#sheet")[0]["top"])

    first = top()
    grip = page.locator("#pull").bounding_box()
    page.mouse.move(grip["x"] + grip["width"] / 2, grip["y"] + 20)
    page.mouse.down()
    page.mouse.move(grip["x"] + grip["width"] / 2, grip["y"] - 220, steps=4)
    page.mouse.up()
    assert top() < first - 100
    page.focus("#pull")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowDown")
    assert top() > first + 50
    assert "low" in page.get_attribute("#pull", "aria-label")
    assert boxes(page, "#cautions")[0]["bottom"] <= NARROW[1]
    wide, room = page.eval_on_selector("html", "one => [one.scrollHeight, one.clientHeight]")
    assert wide <= room


def test_the_cautions_are_shown_in_short_and_whole(looked: Any) -> None:
    page = looked
    assert page.is_visible("#cautions summary")
    assert not page.is_visible("#cautions ul")
    page.click("#cautions summary")
    whole = page.inner_text("#cautions ul")
    # Source: this project's own cautions, which every answer carries in `limits`.
    limits = page.evaluate("() => fetch('/api/catalog').then(a => a.json()).then(c => c.limits)")
    for sentence in limits[1:11]:
        assert sentence.rstrip(".") in whole
    page.click("#cautions summary")


def test_focus_is_seen_on_every_control(open_page: Opener) -> None:
    page = open_page().page
    unseen = []
    for _ in range(24):
        page.keyboard.press("Tab")
        seen = page.evaluate(
            """() => {
              const one = document.activeElement;
              const ring = node => {
                const style = getComputedStyle(node);
                return style.outlineStyle !== 'none' && parseFloat(style.outlineWidth) >= 2;
              };
              const box = one.closest('.box');
              const frame = document.getElementById('frame');
              return ring(one) || (one.id === 'map' && ring(frame))
                || (box !== null && getComputedStyle(box).boxShadow !== 'none');
            }"""
        )
        if not seen:
            unseen.append(page.evaluate("document.activeElement.outerHTML.slice(0, 120)"))
    assert unseen == []
