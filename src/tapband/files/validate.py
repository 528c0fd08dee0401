"""Checks a table of the campaign file against its model and says each fault in our own words."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from copy import deepcopy
from dataclasses import dataclass
from typing import Any, Generic, TypeVar

from pydantic import BaseModel, ValidationError

from tapband.files.faults import Findings, RuleError, nearest, shown
from tapband.files.fields import Part

M = TypeVar("M", bound=Part)
Path = tuple[str | int, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Checked(Generic[M]):
    """A model, None where too little of it stands; ``doubtful`` where keys were refused and left out."""

    part: M | None
    doubtful: bool = False


def check(
    model: type[M], data: object, file: str, path: Path, findings: Findings, label: str = ""
) -> Checked[M]:
    """The table ``data`` that stands at ``path`` of ``file``, as its model.

    Keys that break a rule are noted and left out, so that the rest can still be checked. ``label`` names
    the whole table in a message where its path alone would not help.
    """
    if not isinstance(data, dict):
        head = f"[[{path[0]}]]" if isinstance(path[-1], int) else f"[{dotted(path)}]"
        findings.add(f"{file}, {dotted(path)}", "must be a table", shown(data), f"write {head}")
        return Checked(part=None, doubtful=True)
    left = deepcopy(data)
    doubtful = False
    for _ in range(3):
        try:
            return Checked(part=model.model_validate(left), doubtful=doubtful)
        except ValidationError as error:
            if not doubtful:
                _note(model, error, left, f"{file}, ", path, label, findings)
            doubtful = True
            if not _leave_out(error, left):
                break
    return Checked(part=None, doubtful=True)


def dotted(path: Sequence[str | int]) -> str:
    """A path as a person counts: ``("source", 1, "limits")`` is ``source[2].limits``."""
    text = ""
    for step in path:
        text += f"[{step + 1}]" if isinstance(step, int) else f".{step}" if text else str(step)
    return text


def _plain(loc: Sequence[str | int]) -> Path:
    """A pydantic location without the marks of its unions."""
    marks = {"str", "constrained-str", "list[constrained-str]"}
    return tuple(
        step for step in loc if isinstance(step, int) or not (step in marks or step[0] in "<" or "[" in step)
    )


def _note(
    model: type[Part], error: ValidationError, data: dict[str, Any], file: str, path: Path, label: str,
    findings: Findings,
) -> None:  # fmt: skip
    """Note every fault of a validation; a missing key that an unknown one stands for is said once."""
    errors = error.errors(include_url=False)
    offered: set[Path] = set()
    said: set[Path] = set()
    for item in errors:
        loc = _plain(item["loc"])
        if item["type"] == "extra_forbidden":
            near = nearest(str(loc[-1]), _keys(model, loc[:-1]))
            if near:
                offered.add((*loc[:-1], near))
    for item in errors:
        loc = _plain(item["loc"])
        if loc in said or (item["type"] == "missing" and loc in offered):
            continue
        said.add(loc)
        owner = _plain(loc[:-1])
        whole = label if label and not owner else dotted((*path, *owner))
        found = _rule_broken(model, path, loc, item["type"], item.get("ctx", {}), item["input"], item["msg"])
        where = whole if item["type"] == "missing" else dotted((*path, *loc))
        findings.add(file + (where or "top level"), found.rule, found.got, found.do)


def _rule_broken(
    model: type[Part], path: Path, loc: Path, kind: str, ctx: Mapping[str, Any], got: object, text: str
) -> RuleError:
    key = str(loc[-1]) if loc else ""
    if kind == "extra_forbidden":
        return RuleError("unknown key", shown(key), _offer_key(key, _keys(model, loc[:-1])))
    sample = _example(model, loc) or _example(model, loc[:-1])
    if kind == "missing":
        return RuleError(f"needs {key}", "nothing", _offer_missing((*path, *loc), sample))
    do = f"write for example {sample}" if sample else ""
    match kind:
        case "literal_error":
            known = [
                word.strip().strip("'") for word in str(ctx["expected"]).replace(" or ", ", ").split(", ")
            ]
            if all(word.isdigit() for word in known):
                return RuleError(f"must be {' or '.join(known)}", shown(got), f"write {known[0]}")
            one = ", ".join(shown(word) for word in known)
            near = nearest(str(got), known)
            return RuleError(
                f"must be one of {one}", shown(got), f"write {shown(near)}" if near else "choose one"
            )
        case "string_too_short":
            return RuleError("must not be empty", shown(got), do)
        case "string_type" | "list_type" if kind != "list_type" or "Text" in text:
            return RuleError("must be text in quotes", shown(got), do)
        case "list_type":
            return RuleError("must be a list", shown(got), do)
        case "float_type" | "int_type" | "int_from_float":
            whole = "whole " if kind.startswith("int") else ""
            if isinstance(got, str) and re.fullmatch(r"-?\d+" if whole else r"-?\d+(\.\d+)?", got):
                do = f"write {got}"
            return RuleError(f"must be a {whole}number", shown(got), do)
        case "finite_number":
            return RuleError("must be finite", shown(got), do)
        case "too_short" | "too_long":
            most = ctx.get("min_length", ctx.get("max_length"))
            words = f"at least {most} value" if most == 1 else f"{most} values"
            return RuleError(f"must hold {words}", shown(got), do)
        case "greater_than" | "greater_than_equal" | "less_than" | "less_than_equal":
            word = {"greater_than": "above", "greater_than_equal": "at least", "less_than": "below"}
            bound = next(iter(ctx.values()))
            return RuleError(f"must be {word.get(kind, 'at most')} {bound:g}", shown(got), do)
        case "model_type" | "dict_type" | "model_attributes_type":
            return RuleError("must be a table", shown(got), do)
    return RuleError(text[:1].lower() + text[1:], shown(got), do)


def _offer_missing(path: Path, sample: str) -> str:
    """What to write where a key is missing; a list of tables has a header of its own."""
    if sample.startswith("[{"):
        return "write [[" + ".".join(step for step in path if isinstance(step, str)) + "]]"
    return f"write for example {path[-1]} = {sample}"


def _offer_key(key: str, known: Sequence[str]) -> str:
    near = nearest(key, known)
    return f"write {near}" if near else "known keys: " + ", ".join(known)


def _keys(model: type[Part], owner: Path) -> list[str]:
    """Known keys of the table at a location."""
    found = _model_at(model, owner)
    return [field.alias or name for name, field in found.model_fields.items()] if found else []


def _example(model: type[Part], loc: Path) -> str:
    """The example of the key at a location, as TOML; empty where there is none."""
    words = [step for step in loc if isinstance(step, str)]
    owner = _model_at(model, loc[: loc.index(words[-1])]) if words else None
    if owner is None:
        return ""
    for name, field in owner.model_fields.items():
        if (field.alias or name) == words[-1] and field.examples:
            value = field.examples[0]
            return shown(value[0] if isinstance(loc[-1], int) and isinstance(value, list) else value)
    return ""


def _model_at(model: type[Part], loc: Path) -> type[BaseModel] | None:
    """The model that stands at a location below another one."""
    found: type[BaseModel] = model
    for step in loc:
        if isinstance(step, int):
            continue
        fields = {field.alias or name: field for name, field in found.model_fields.items()}
        inner = _models(fields[step].annotation) if step in fields else []
        if not inner and step in fields:
            return None
        found = inner[0] if inner else found
    return found


def _models(annotation: Any) -> list[type[BaseModel]]:
    """Models inside an annotation."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return [annotation]
    return [model for inner in getattr(annotation, "__args__", ()) for model in _models(inner)]


def _leave_out(error: ValidationError, data: dict[str, Any]) -> bool:
    """Leave out what broke a rule; False where something missing cannot be helped."""
    done = False
    for item in error.errors(include_url=False):
        loc = _plain(item["loc"])
        if item["type"] == "missing" or not loc:
            return False
        if loc[0] == "channels":  # a channel of which one key is wrong says too little
            loc = loc[:2]
        owner: Any = data
        for step in loc[:-1]:
            try:
                owner = owner[step]
            except (KeyError, IndexError, TypeError):
                owner = None
                break
        key = loc[-1]
        if isinstance(owner, dict) and key in owner:
            del owner[key]
            done = True
        elif isinstance(owner, list):
            data.pop(str(loc[0]), None)
            done = True
    return done
