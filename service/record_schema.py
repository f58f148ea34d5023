"""The JSON schema of an inline aircraft record: the same keys as the record's TOML file."""

from __future__ import annotations

from typing import Any

from perf.record_form import MASS_KG, MAX_CONFIGURATIONS, PROPELLER_STATES, SPEED_KT, Figures

Schema = dict[str, Any]


def _number(bounds: tuple[float, float], description: str) -> Schema:
    low, high = bounds
    return {"type": "number", "minimum": low, "maximum": high, "description": description}


def _table(required: dict[str, Schema], optional: dict[str, Schema] | None = None) -> Schema:
    return {
        "type": "object",
        "properties": {**required, **(optional or {})},
        "required": list(required),
        "additionalProperties": False,
    }


def _list(item: Schema, most: int) -> Schema:
    return {"type": "array", "items": item, "minItems": 1, "maxItems": most}


SOURCE: Schema = {
    "type": "string",
    "minLength": 1,
    "maxLength": 500,
    "description": "Where the figures come from.",
}
NAME: Schema = {"type": "string", "pattern": "^[a-z][a-z0-9-]{0,39}$"}
STATE: Schema = {"type": "string", "enum": list(PROPELLER_STATES)}
PAIR: dict[str, Schema] = {
    "best_glide_eas_kt": _number(SPEED_KT, "Best-glide speed [kt EAS]."),
    "ratio": _number(Figures.RATIO, "Glide ratio."),
}
EFFECT: dict[str, Schema] = {
    **PAIR,
    "drag_factor": _number(Figures.DRAG_FACTOR, "Factor on the drag at no lift."),
}
STALL = _number(SPEED_KT, "Stall speed [kt EAS].")
STATES: dict[str, Schema] = {"propeller": STATE, "configuration": NAME, "source": SOURCE}

RECORD: Schema = {
    "description": "The same keys as an aircraft record's file.",
    **_table(
        {
            "name": {"type": "string", "minLength": 1, "maxLength": 80},
            "mass": _table(
                {
                    "minimum_kg": _number(MASS_KG, "Smallest mass [kg]."),
                    "maximum_kg": _number(MASS_KG, "Largest mass [kg]."),
                    "source": SOURCE,
                }
            ),
            "speeds": _table(
                {
                    "stall_eas_kt": STALL,
                    "stall_mass_kg": _number(MASS_KG, "Mass for the stall speed [kg]."),
                    "maximum_glide_eas_kt": _number(SPEED_KT, "Fastest glide [kt EAS]."),
                    "source": SOURCE,
                }
            ),
            "glide": {
                "anyOf": [
                    _table({**PAIR, "mass_kg": _number(MASS_KG, "Mass [kg]."), **STATES}),
                    _table(
                        {
                            "cd0": _number((0.002, 0.5), "Drag coefficient at no lift."),
                            "k": _number((0.002, 0.5), "Induced drag factor, CD = CD0 + K CL^2."),
                            "wing_area_m2": _number((1.0, 1000.0), "Wing area [m2]."),
                            **STATES,
                        }
                    ),
                ]
            },
            "propeller": _list(_table({"state": STATE, "source": SOURCE}, EFFECT), 4),
            "configuration": _list(
                _table({"name": NAME, "source": SOURCE}, {**EFFECT, "stall_eas_kt": STALL}),
                MAX_CONFIGURATIONS,
            ),
        }
    ),
}
