"""Choices to be made: options whose sources are completed by the sources they replace."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from tapband.files.faults import nearest, offer, shown
from tapband.files.full_scales import read_full_scale
from tapband.files.model import StatedPart
from tapband.files.model_plan import OptionPart, OptionSourcePart, SlotPart
from tapband.files.setting import Place, Setting
from tapband.files.sizes import STATEMENTS
from tapband.files.sources import read_source
from tapband.files.validate import dotted
from tapband.nouns.plan import Option, Slot
from tapband.nouns.source import Source

_FAMILIES = (
    ("standard",),
    ("expanded", "k", "level"),
    ("limits", "lower", "upper", "shape", "top"),
    ("resolution",),
)
_SIZE_KEYS = tuple(key for family in _FAMILIES for key in family)


def read_slots(
    parts: Sequence[tuple[int, SlotPart]],
    stated: Mapping[str, StatedPart],
    names: Sequence[str] | None,
    setting: Setting,
) -> tuple[Slot, ...]:
    """The slots. ``stated`` are the sources as written, ``names`` all names declared."""
    slots = []
    owners: dict[str, str] = {}
    seen: list[str] = []
    for index, part in parts:
        path: tuple[str | int, ...] = ("slot", index)
        if part.name in seen:
            setting.folder.findings.add(
                setting.folder.at(dotted((*path, "name"))),
                "must be a name of its own",
                shown(part.name),
                "rename one",
            )
        seen.append(part.name)
        _check_replaced(part, path, names, owners, setting)
        options = _options(part, path, stated, setting)
        slots.append(Slot(name=part.name, replaces=tuple(part.replaces), options=options))
    return tuple(slots)


def _check_replaced(
    part: SlotPart,
    path: tuple[str | int, ...],
    names: Sequence[str] | None,
    owners: dict[str, str],
    setting: Setting,
) -> None:
    findings = setting.folder.findings
    for i, name in enumerate(part.replaces):
        where = setting.folder.at(dotted((*path, "replaces", i)))
        if names is not None and name not in names:
            near = nearest(name, names or ())
            do = f"write {shown(near)}" if near else "write the name of a source"
            findings.add(where, "must be a declared source", shown(name), do)
        elif name in owners:
            findings.add(where, f"is replaced by {owners[name]} already", shown(name), "remove it from one")
        owners.setdefault(name, f"slot {shown(part.name)}")


def _options(
    part: SlotPart, path: tuple[str | int, ...], stated: Mapping[str, StatedPart], setting: Setting
) -> tuple[Option, ...]:
    findings, options = setting.folder.findings, []
    seen: list[str] = []
    for i, option in enumerate(part.option):
        place = (*path, "option", i)
        if option.name in seen:
            findings.add(
                setting.folder.at(dotted((*place, "name"))), "must be a name of its own in the slot",
                shown(option.name), "rename one",
            )  # fmt: skip
        seen.append(option.name)
        options.append(_option(option, place, part, stated, setting))
    return tuple(options)


def _option(
    option: OptionPart, path: tuple[str | int, ...], slot: SlotPart, stated: Mapping[str, StatedPart],
    setting: Setting,
) -> Option:  # fmt: skip
    findings = setting.folder.findings
    scale = None
    if option.full_scale is not None:
        where = setting.folder.at(dotted((*path, "full_scale")))
        scale = read_full_scale(option.full_scale, where, setting.folder)
    given = [source.name for source in option.sources]
    whole = f"{dotted(path)} {shown(option.name)}"
    for name in slot.replaces:
        if name not in given:
            findings.add(
                setting.folder.at(whole), f"needs a source {shown(name)}, which the slot replaces",
                shown(given), f"add {{ name = {shown(name)}, ... }}; size zero where it has none",
            )  # fmt: skip
    sources: list[Source] = []
    for i, part in enumerate(option.sources):
        place = (*path, "sources", i)
        where = setting.folder.at(dotted((*place, "name")))
        if part.name not in slot.replaces:
            findings.add(
                where, "must be one that the slot replaces", shown(part.name), offer(part.name, slot.replaces)
            )
            continue
        if part.name in given[:i]:
            findings.add(where, "must be there once", shown(part.name), "remove one")
        if part.full_scale is not None and option.full_scale is not None:
            key = setting.folder.at(dotted((*place, "full_scale")))
            findings.add(key, "is stated by the option already", shown(part.full_scale), "keep one")
        found = _complete(part, place, stated.get(part.name), scale, setting)
        if found is not None:
            sources.append(found)
    return Option(name=option.name, cost=option.cost, full_scale=scale, sources=tuple(sources))


def _complete(
    part: OptionSourcePart,
    path: tuple[str | int, ...],
    base: StatedPart | None,
    scale: float | None,
    setting: Setting,
) -> Source | None:
    """The option's source, what it does not state taken from the one it replaces."""
    if base is None:
        return None
    whole = setting.folder.at(f"{dotted(path)} {shown(part.name)}")
    place = Place(folder=setting.folder, path=path, whole=whole)
    before = len(setting.folder.findings)
    found = read_source(inherit(part, base), place, setting, full_scale=scale)
    setting.folder.findings.forget_repeats(before)
    return found


def inherit(part: OptionSourcePart, base: StatedPart) -> OptionSourcePart:
    """The part with every key it leaves out taken from ``base``.

    A size is inherited as a whole: where the part states one, only the company of the same kind of
    statement (k, level, shape, top) is still taken from the base.
    """
    own = {key for key in type(part).model_fields if getattr(part, key) is not None}
    taken = {key: getattr(base, key) for key in type(part).model_fields if key not in own}
    statement = own & set(STATEMENTS)
    if statement:
        family = next(keys for keys in _FAMILIES if statement & set(keys))
        keep = set(family) - set(STATEMENTS)
        keep |= {"lower", "upper"} if statement <= {"lower", "upper"} else set()
        taken = {key: value for key, value in taken.items() if key not in _SIZE_KEYS or key in keep}
    for a, b in (("k", "level"), ("dof", "reliability"), ("level", "k"), ("reliability", "dof")):
        if a in own:
            taken.pop(b, None)
    if "shape" in own and part.shape != "trapezoidal":
        taken.pop("top", None)
    return part.model_copy(update=taken)
