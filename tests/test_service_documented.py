"""Every route, setting, limit and problem type is named where people look for it."""

from __future__ import annotations

from dataclasses import fields
from pathlib import Path

import pytest
from fastapi.routing import APIRoute

from service.cautions import CAUTIONS
from service.command_line import MARGINS
from service.problems import ALL_TYPES
from service.routes import router
from service.settings import Settings

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="module")
def text() -> str:
    return "\n".join(
        (ROOT / name).read_text(encoding="utf-8") for name in ("README.md", "DEVELOPERS.md")
    )


def test_routes_are_documented(text: str) -> None:
    paths = {route.path for route in router.routes if isinstance(route, APIRoute)}
    paths |= {"/openapi.json", "/static/", "/static/lib/map/"}
    missing = {path for path in paths if f"`{path}`" not in text and f"{path}`" not in text}
    assert missing == set()


def test_settings_and_options_are_documented(text: str) -> None:
    wanted = {field.name for field in fields(Settings)} - {"data", "static", "work"}
    wanted |= {"--data", "--work", "--host", "--port", "--case", "--out", "ENGINEOUT_DATA"}
    assert {name for name in wanted if f"`{name}" not in text} == set()


def test_problem_types_are_documented(text: str) -> None:
    assert {kind.slug for kind in ALL_TYPES if f"`{kind.slug}`" not in text} == set()


def test_margins_are_documented(text: str) -> None:
    assert {name for name in MARGINS if f"`{name}`" not in text} == set()


def test_cautions_stand_at_the_top_of_the_readme() -> None:
    readme = " ".join((ROOT / "README.md").read_text(encoding="utf-8").split())
    before_commands = readme.split("```sh")[0]
    assert [caution for caution in CAUTIONS if caution not in before_commands] == []
