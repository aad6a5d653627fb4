"""What is typed under a model beside a data column: role and shape words in any order and case -> an `Entry`."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, replace
from enum import StrEnum

from bridge.regression.spec import Shape
from bridge.workbook import spelling
from bridge.workbook.request import Scalar

MOST_POWER = 12
_LONGEST = 200


class Role(StrEnum):
    """What a data column does in a model."""

    RESPONSE = "response"
    PREDICTOR = "predictor"
    CATEGORY = "category"
    CANDIDATE = "candidate"
    WEIGHT = "weight"
    LABEL = "label"
    ORDER = "order"
    GROUP = "group"


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry, read. CANDIDATE means that the column's kind decides between predictor and category."""

    role: Role
    candidate: bool = False
    shape: Shape = Shape.AS_IS
    degree: int = 1
    bends: tuple[float, ...] = ()
    base: str | None = None


@dataclass(frozen=True, slots=True)
class Misread:
    """Why an entry is not understood: a key of the catalogue and the fields of its wording."""

    key: str
    fields: dict[str, object]


_ROLES = {role.value: role for role in Role} | {
    "categories": Role.CATEGORY,
    "weights": Role.WEIGHT,
    "weighting": Role.WEIGHT,
    "labels": Role.LABEL,
    "groups": Role.GROUP,
    "predictors": Role.PREDICTOR,
}
_SHAPES = {
    "log": Shape.LOG,
    "logarithm": Shape.LOG,
    "ln": Shape.LOG,
    "root": Shape.ROOT,
    "sqrt": Shape.ROOT,
    "reciprocal": Shape.RECIPROCAL,
}
_POWERS = {"squared": 2, "cubed": 3}
_FILLING = frozenset({"a", "an", "as", "the", "with", "of", "and", "to", "at", "square", "natural"})
_NOT_USED = frozenset({"", "-", "–", "—", "no", "none", "not used", "unused"})
_NUMBER = r"[-+\u2212]?\d+(?:[.,]\d+)*(?:[eE][-+]?\d+)?"
_BEND = re.compile(
    rf"\bbends?\b(?:\s+at)?[\s:=]*({_NUMBER}(?:(?:\s*(?:\band\b|&|;|\+)\s*|\s*,\s+|\s+){_NUMBER})*)", re.I
)
_POWER = re.compile(rf"(?:\bto\s+)?(?:\bthe\s+)?\bpower\b(?:\s+of)?\s*({_NUMBER})?|\^\s*({_NUMBER})", re.I)
_BASE = re.compile(r"\bbase\b(?:\s+level)?\s*[:=]?\s*(.*)", re.I | re.S)


def is_unused(typed: Scalar) -> bool:
    """Whether an entry only says that the column is not used."""
    return isinstance(typed, str) and _spaced(typed).casefold() in _NOT_USED


def parse(typed: Scalar) -> Entry | Misread | None:
    """The entry's meaning, why there is none, or None for a column that is not used."""
    if is_unused(typed):
        return None
    if not isinstance(typed, str):
        return Misread("entry-not-words", {"typed": number_as_typed(typed)})
    text = _spaced(typed)
    if len(text) > _LONGEST:
        return Misread("entry-unknown-word", {"typed": f"{text[:60]}…", "because": "", "hint": _roles()})
    entry = _parsed(text)
    if isinstance(entry, Misread):
        return replace(entry, fields={"typed": text, **entry.fields})
    return entry


def number_as_typed(value: Scalar) -> str:
    """A value of a cell as a message repeats it."""
    if isinstance(value, bool):
        return "TRUE" if value else "FALSE"
    return f"{value:.15g}" if isinstance(value, (int, float)) else value


def number(text: str) -> float | None:
    """A number as people type it, decimal point or comma; None where it can be read in two ways or none."""
    bare = text.strip().replace("\u2212", "-")
    if re.fullmatch(r"[-+]?\d{1,3}(,\d{3})+", bare) and not bare.lstrip("+-").startswith("0,"):
        return None  # 12,500: a thousand or a decimal?
    if bare.count(",") == 1 and "." not in bare:
        bare = bare.replace(",", ".")
    try:
        value = float(bare)
    except ValueError:
        return None
    return value if abs(value) < 1e300 and re.fullmatch(_NUMBER, bare) else None


def _spaced(text: str) -> str:
    return " ".join(text.replace("\u00a0", " ").split())


def _parsed(text: str) -> Entry | Misread:
    rest, base = _take_base(text)
    rest, bends = _take_bends(rest)
    if isinstance(bends, Misread):
        return bends
    rest, degree = _take_power(rest)
    if isinstance(degree, Misread):
        return degree
    words = [word for word in re.split(r"[\s,;:+/()]+", rest.casefold()) if word and word not in _FILLING]
    unknown = [word for word in words if word not in _ROLES and word not in _SHAPES and word not in _POWERS]
    if unknown:
        because = "" if unknown[0] == text.casefold() else f' because of "{unknown[0]}"'
        return Misread("entry-unknown-word", {"because": because, "hint": _hint(text, unknown[0])})
    degrees = [_POWERS[word] for word in words if word in _POWERS] + ([degree] if degree else [])
    shapes = [_SHAPES[word] for word in dict.fromkeys(words) if word in _SHAPES]
    roles = list(dict.fromkeys(_ROLES[word] for word in words if word in _ROLES))
    return _combined(roles, shapes, degrees, bends, base)


def _hint(text: str, word: str) -> str:
    """The whole entry with the one word put right, where a right word is near."""
    known = (*_ROLES, *_SHAPES, *_POWERS, "bend", "base", "power")
    near = spelling.nearest(word, known)
    if near is None:
        return _roles()
    fixed = re.sub(re.escape(word), near, text, count=1, flags=re.I)
    return f' Did you mean "{fixed}"?'


def _roles() -> str:
    return f" The roles are {', '.join(role.value for role in Role)}."


# --- parts that carry a value ------------------------------------------------------------------


def _take_base(text: str) -> tuple[str, str | None]:
    """The text without its base level, and the level. A role may also follow the level."""
    found = _BASE.search(text)
    if found is None:
        return text, None
    before, level = text[: found.start()].strip(), found[1].strip()
    if not any(word in before.casefold().split() for word in ("category", "candidate")):
        role = re.search(r"(?:\s+|^)((?:candidate\s+category|category\s+candidate|category|candidate))$", level, re.I)
        if role:
            before, level = f"{before} {role[1]}", level[: role.start()].strip()
    quoted = re.fullmatch(r"([\"'“‘«])(.+)([\"'”’»])", level)
    return before, quoted[2] if quoted else level


def _take_bends(text: str) -> tuple[str, tuple[float, ...] | Misread]:
    bends: list[float] = []
    found = _BEND.search(text)
    while found:
        for word in re.findall(_NUMBER, found[1]):
            value = number(word)
            if value is None:
                return text, Misread("bend-unclear", {"number": word})
            bends.append(value)
        text = f"{text[: found.start()]} {text[found.end() :]}"
        found = _BEND.search(text)
    if re.search(r"\bbends?\b", text, re.I):
        return text, Misread("bend-without-place", {})
    return text, tuple(sorted(set(bends)))


def _take_power(text: str) -> tuple[str, int | Misread | None]:
    found = _POWER.search(text)
    if found is None:
        return text, None
    value = number(found[1] or found[2] or "")
    if value is None or value != int(value) or not 2 <= value <= MOST_POWER:
        return text, Misread("power-out-of-range", {"most": MOST_POWER})
    return f"{text[: found.start()]} {text[found.end() :]}", int(value)


# --- what goes with what -----------------------------------------------------------------------


def _combined(
    roles: Sequence[Role], shapes: Sequence[Shape], degrees: Sequence[int], bends: tuple[float, ...], base: str | None
) -> Entry | Misread:
    candidate = Role.CANDIDATE in roles
    plain = [role for role in roles if role is not Role.CANDIDATE]
    if not roles:
        return Misread("entry-without-role", {})
    if len(plain) > 1 or (candidate and plain and plain[0] not in (Role.PREDICTOR, Role.CATEGORY)):
        return Misread("entry-two-roles", {"first": roles[0].value, "second": roles[1].value})
    role = plain[0] if plain else Role.CANDIDATE
    if base is not None and role is Role.CANDIDATE:
        role = Role.CATEGORY
    shaping = len(shapes) + len(degrees) + (1 if bends else 0)
    problem = _misfit(role, shapes, degrees, bends, base, shaping)
    if problem is not None:
        return problem
    shape = shapes[0] if shapes else Shape.AS_IS
    return Entry(role, candidate, shape, degrees[0] if degrees else 1, bends, base or None)


def _misfit(
    role: Role,
    shapes: Sequence[Shape],
    degrees: Sequence[int],
    bends: tuple[float, ...],
    base: str | None,
    shaping: int,
) -> Misread | None:
    takes_shape = role in (Role.PREDICTOR, Role.CANDIDATE, Role.RESPONSE)
    if shaping and not takes_shape:
        return Misread("shape-needs-number-role", {"role": role.value})
    if role is Role.RESPONSE and (degrees or bends or Shape.RECIPROCAL in shapes):
        return Misread("response-shape", {})
    if shaping > 1:
        return Misread("two-shapes", {})
    if base is not None and role is not Role.CATEGORY:
        return Misread("base-needs-category", {})
    if base == "":
        return Misread("base-without-level", {})
    return None
