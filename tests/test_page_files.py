"""The page's files, read without a browser: small modules, text only as text, enough contrast."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

STATIC = Path(__file__).resolve().parent.parent / "static"
MODULES = sorted((STATIC / "js").glob("*.js"))
MODULE_LINES = 200
PURE = {"state", "request", "queue", "format", "margins", "problem", "geometry", "profile"}
FORBIDDEN = (
    "innerHTML",
    "outerHTML",
    "insertAdjacentHTML",
    "document.write",
    "eval(",
    "new Function",
)


def test_there_are_modules() -> None:
    assert len(MODULES) > 10
    assert {path.stem for path in MODULES} >= PURE


@pytest.mark.parametrize("path", MODULES, ids=lambda path: path.stem)
def test_a_module_is_small_and_writes_text_only(path: Path) -> None:
    text = path.read_text()
    assert len(text.splitlines()) <= MODULE_LINES
    assert [word for word in FORBIDDEN if word in text] == []
    assert "http://" not in text.replace("http://www.w3.org/2000/svg", "")
    assert "https://" not in text


@pytest.mark.parametrize("name", sorted(PURE))
def test_a_pure_module_knows_no_document(name: str) -> None:
    text = (STATIC / "js" / f"{name}.js").read_text()
    code = re.sub(r"/\*.*?\*/|//[^\n]*", "", text, flags=re.DOTALL)
    assert not re.search(r"\b(document|window|location|history|fetch|globalThis)\b", code)
    for other in re.findall(r'from "\./(\w+)\.js"', code):
        assert other in PURE


def test_the_index_has_no_inline_script_or_style() -> None:
    text = (STATIC / "index.html").read_text()
    assert re.findall(r"<script(?![^>]*\bsrc=)[^>]*>", text) == []
    assert "<style" not in text
    assert re.findall(r"\s(style|on\w+)=", text) == []
    assert "//" not in re.sub(r"<!--.*?-->", "", text)  # no address of another host


def test_every_file_named_is_there() -> None:
    text = (STATIC / "index.html").read_text()
    for path in (STATIC / "css").glob("*.css"):
        text += path.read_text()
    named = set(re.findall(r"/static/((?:js|css|icons)/[\w./-]+)", text))
    assert len(named) > 6
    assert [name for name in named if not (STATIC / name).is_file()] == []


def test_every_element_that_a_module_asks_for_is_there() -> None:
    index = (STATIC / "index.html").read_text()
    present = set(re.findall(r'\bid="([\w-]+)"', index))
    wanted = {
        name for path in MODULES for name in re.findall(r'byId\("([\w-]+)"\)', path.read_text())
    }
    assert wanted - present == set()


def colours() -> dict[str, tuple[int, int, int]]:
    """Return the page's named colours."""
    text = (STATIC / "css" / "base.css").read_text()
    found = re.findall(r"--([\w-]+): #([0-9a-f]{6});", text)
    return {name: (int(c[:2], 16), int(c[2:4], 16), int(c[4:], 16)) for name, c in found}


def luminance(colour: tuple[int, int, int]) -> float:
    """Return relative luminance. Source: WCAG 2.2, definition of relative luminance."""
    linear = [
        c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4
        for c in (part / 255 for part in colour)
    ]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str) -> float:
    """Return the contrast of two named colours. Source: WCAG 2.2, definition of contrast ratio."""
    table = colours()
    low, high = sorted((luminance(table[one]), luminance(table[other])))
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("ink", ["ink", "ink-soft", "deep"])
@pytest.mark.parametrize("ground", ["paper", "paper-high", "paper-low"])
def test_text_has_contrast(ink: str, ground: str) -> None:
    assert contrast(ink, ground) >= 4.5  # Source: WCAG 2.2, success criterion 1.4.3


@pytest.mark.parametrize("ground", ["paper", "paper-high", "paper-low"])
def test_edges_of_fields_have_contrast(ground: str) -> None:
    assert contrast("rule-strong", ground) >= 3.0  # Source: WCAG 2.2, success criterion 1.4.11
