"""A model as plain values, for files, and back; and as one line, for the terminal."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from bayeslca.model.answered_together import AnsweredTogether
from bayeslca.responses.item import Groups, Item

if TYPE_CHECKING:
    from bayeslca.model.latent_class_model import LatentClassModel


def plain_values(model: LatentClassModel) -> dict[str, Any]:
    """Return what a model was made with, as values that JSON can hold."""
    groups, free = model.groups, model.free_by_group
    values: dict[str, Any] = {
        "items": [asdict(item) | {"categories": list(item.categories)} for item in model.items],
        "classes": model.classes if isinstance(model.classes, int) else list(model.classes),
        "statements": list(model.statements),
        "groups": groups and {"name": groups.name, "levels": list(groups.levels)},
        "statement_sources": dict(model.statement_sources),
        "free_by_group": free if isinstance(free, bool) else list(free),
    }
    if model.pooled:
        values |= {"pooled": True, "spread_prior": list(model.spread_prior)}
    if model.answered_together:
        values["answered_together"] = [one.as_dict() for one in model.answered_together]
    return values


def arguments_from(values: Mapping[str, Any]) -> dict[str, Any]:
    """Return the arguments of the model that `plain_values` were taken from."""
    groups = values["groups"]
    return {
        "items": tuple(
            Item(**(item | {"categories": tuple(item["categories"])})) for item in values["items"]
        ),
        "classes": values["classes"],
        "statements": values["statements"],
        "groups": groups and Groups(groups["name"], tuple(groups["levels"])),
        "statement_sources": values["statement_sources"],
        "free_by_group": values.get("free_by_group", False),
        "pooled": values.get("pooled", False),
        "spread_prior": tuple(values.get("spread_prior", (1.0, 1.0))),
        "answered_together": tuple(
            AnsweredTogether(**one) for one in values.get("answered_together", ())
        ),
    }


def shown(model: LatentClassModel) -> str:
    """Return the model in one line."""
    classes = model.classes if model.exploratory else list(model.class_names)
    parts = [f"{len(model.items)} items", f"classes={classes}"]
    if model.statements:
        parts.append(f"statements={list(model.statements)}")
    if model.groups:
        parts.append(f"groups={model.groups.name}: {', '.join(model.groups.levels)}")
    if model.free_by_group:
        parts.append(f"free_by_group={model.free_by_group}")
    if model.pooled:
        parts.append("pooled=True")
    if model.answered_together:
        parts.append(f"answered_together={[list(one.items) for one in model.answered_together]}")
    return f"LatentClassModel({', '.join(parts)})"
