"""What pydantic finds, in the words of the file: dotted key, what was expected, what was found.

Every fault of a table is collected; none is raised here.
"""

from __future__ import annotations

import types
from typing import TYPE_CHECKING, Annotated, Any, Self, Union, get_args, get_origin

from pydantic import BaseModel, Tag, ValidationError

from spheru.config.models import Quantity
from spheru.errors import ConfigError, Fault, InputFault, nearest

if TYPE_CHECKING:
    from collections.abc import Collection, Iterator, Mapping, Sequence

    from spheru.config.models import Table

__all__ = ["Collecting", "check", "dotted", "refusal", "shown"]

_KINDS = {
    "bool_type": "true or false",
    "dict_type": "a table",
    "finite_number": "a finite number",
    "float_type": "a number",
    "int_from_float": "a whole number",
    "int_type": "a whole number",
    "list_type": "a list",
    "model_type": "a table",
    "string_type": "text in quotes",
}
_BOUNDS = {
    "greater_than": ("above", "gt"),
    "greater_than_equal": ("of at least", "ge"),
    "less_than": ("below", "lt"),
    "less_than_equal": ("of at most", "le"),
}


def check(
    model: type[Table], given: Mapping[str, Any], *, also: Collection[str] = ()
) -> tuple[dict[str, Any], list[Fault]]:
    """Read the keys of a table one by one.

    Parameters
    ----------
    model : type of Table
        The shape that is expected.
    given : mapping
        What stands in the file.
    also : collection of str, optional
        Names that would have been right too, for the advice on a misspelt one.

    Returns
    -------
    good : dict
        What could be read, with defaults where nothing was given; keys at fault are left out.
    faults : list of Fault
        The rest, in the order of the file.
    """
    good: dict[str, Any] = {}
    problems: list[dict[str, Any]] = []
    blank = model.model_construct()
    for key, value in given.items():
        if key not in model.model_fields:
            problems.append({"type": "extra_forbidden", "loc": (key,), "input": value})
            continue
        try:
            model.__pydantic_validator__.validate_assignment(blank, key, value)
        except ValidationError as found:
            problems.extend(dict(error) for error in found.errors(include_url=False))
        else:
            good[key] = getattr(blank, key)
    for key, field in model.model_fields.items():
        if key in given:
            continue
        if field.is_required():
            problems.append({"type": "missing", "loc": (key,), "input": given})
        else:
            good[key] = field.get_default(call_default_factory=True)
    return good, _worded(model, problems, also)


class Collecting:
    """A block in which a fault that is raised becomes one of a list.

    Parameters
    ----------
    faults : list of Fault
        Where it is added.
    where : str
        Dotted key of what is being read.

    Examples
    --------
    >>> faults = []
    >>> with Collecting(faults, "seed"):
    ...     raise InputFault("expected a whole number")
    >>> str(faults[0])
    'seed: expected a whole number'
    """

    def __init__(self, faults: list[Fault], where: str) -> None:
        self.faults, self.where = faults, where

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: object, fault: object, trace: object) -> bool:
        if not isinstance(fault, InputFault):
            return False
        if isinstance(fault, ConfigError):  # a file within: its faults keep their own keys
            self.faults.extend(
                Fault(where=f"{self.where}: {f.where}".removesuffix(": "), what=f.what)
                for f in fault.faults
            )
        else:
            self.faults.append(Fault(where=self.where, what=str(fault)))
        return True


def refusal(source: str, faults: Sequence[Fault]) -> ConfigError:
    r"""Return the error that lists faults, one line each whatever the file held.

    Parameters
    ----------
    source : str
        Name of the file.
    faults : sequence of Fault
        What was found.

    Returns
    -------
    error : ConfigError
        To be raised.

    Examples
    --------
    >>> print(refusal("run.toml", [Fault(where="title", what="got 'a\rb'")]))
    run.toml: 1 fault
      title: got 'a\rb'
    """
    return ConfigError(
        source, [Fault(where=_printable(f.where), what=_printable(f.what)) for f in faults]
    )


def _printable(text: str) -> str:
    return "".join(c if c.isprintable() else ascii(c)[1:-1] for c in text)


def dotted(place: Sequence[str | int]) -> str:
    """Return a place in a file as a dotted key.

    Examples
    --------
    >>> dotted(("cooling", "steps", 0, "rate"))
    'cooling.steps[0].rate'
    """
    text = "".join(f"[{key}]" if isinstance(key, int) else f".{key}" for key in place)
    return text.removeprefix(".")


def shown(value: object) -> str:
    """Return a value of a file as it may be quoted in a message.

    Examples
    --------
    >>> shown("sektion"), shown(True), shown({"a": 1})
    ("'sektion'", 'true', 'a table')
    """
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "a list"
    text = str(value).lower() if isinstance(value, bool) else repr(value)
    return text if len(text) <= 60 else f"{text[:57]}..."


def _worded(
    model: type[Table], problems: list[dict[str, Any]], also: Collection[str]
) -> list[Fault]:
    missing: dict[tuple[str | int, ...], list[str]] = {}
    for problem in problems:
        if problem["type"] == "missing":
            *parent, key = problem["loc"]
            missing.setdefault(tuple(parent), []).append(key)
    faults = []
    for problem in sorted(problems, key=lambda found: found["type"] == "missing"):
        *parent, key = problem["loc"]
        wanting = missing.get(tuple(parent), [])
        if problem["type"] == "extra_forbidden":
            names = list(_fields(_at(model, parent)))
            close = nearest(key, wanting) or nearest(key, [*names, *(also if not parent else ())])
            if close in wanting:  # one fault, not two: the key is there, but misspelt
                wanting.remove(close)
            hint = f"; did you mean '{close}'?" if close else f"; known are {', '.join(names)}"
            what = f"unknown key{hint}"
        elif problem["type"] == "missing" and key not in wanting:
            continue
        else:
            what = _what(model, problem)
        place = [part for part in problem["loc"] if not _is_tag(part)]
        if problem["type"].startswith("union_tag") and isinstance(problem["input"], dict):
            place.append("law")
        faults.append(Fault(where=dotted(place), what=what))
    return faults


def _what(model: type[Table], problem: dict[str, Any]) -> str:  # noqa: PLR0911 (one line a kind)
    kind, given, context = problem["type"], problem.get("input"), problem.get("ctx", {})
    members = _at(model, problem["loc"])
    if kind == "quantity":
        return str(context["why"])
    if kind == "missing":
        return f"is missing; expected {_expected(members)}"
    if kind.startswith("union_tag"):
        return _law([tag.strip("<>") for tag, _, _ in members if tag], given)
    if kind == "literal_error":
        names = context["expected"].replace("'", "").replace(" or ", ", ").split(", ")
        return _one_of(names, given)
    if kind in _BOUNDS:
        word, name = _BOUNDS[kind]
        return f"expected a number {word} {context[name]:g}, got {shown(given)}"
    if kind in ("too_short", "too_long"):
        word, name = ("least", "min") if kind == "too_short" else ("most", "max")
        many = context[f"{name}_length"]
        return f"expected a list of at {word} {many}, got {context['actual_length']}"
    if kind in _KINDS:
        advice = f" of {_expected(members)}" if kind == "list_type" and members else ""
        advice = " of tables, [[...]] or [{ ... }]" if advice == " of a table" else advice
        return f"expected {_KINDS[kind]}{advice}, got {shown(given)}"
    return f"{problem['msg']}, got {shown(given)}"


def _law(laws: list[str], given: object) -> str:
    if not isinstance(given, dict):
        return f"expected a table, got {shown(given)}"
    if "law" not in given:
        return f"is missing; expected one of {', '.join(laws)}"
    return _one_of(laws, given["law"])


def _one_of(names: list[str], given: object) -> str:
    close = nearest(str(given), names)
    hint = f"; did you mean '{close}'?" if close else ""
    return f"expected one of {', '.join(names)}, got {shown(given)}{hint}"


_Member = tuple[str | None, Any, tuple[Any, ...]]


_WORDS: dict[Any, str] = {str: "text in quotes", bool: "true or false", int: "a whole number"}


def _expected(members: list[_Member]) -> str:
    """Say in words what a value of a type looks like."""
    if not members:
        return "a value"
    _, kind, notes = members[0]
    if quantity := next((note for note in notes if isinstance(note, Quantity)), None):
        return quantity.expected
    if _is_list(kind):
        return _expected(list(_members(get_args(kind)[0])))
    if isinstance(kind, type) and issubclass(kind, BaseModel):
        return "a table"
    choices = [str(choice) for choice in get_args(kind)]
    return f"one of {', '.join(choices)}" if choices else _WORDS.get(kind, "a number")


def _is_list(kind: Any) -> bool:
    return getattr(kind, "__origin__", None) is list


def _is_tag(key: str | int) -> bool:
    return isinstance(key, str) and key.startswith("<")


def _members(annotation: Any, notes: tuple[Any, ...] = ()) -> Iterator[_Member]:
    """Take an annotation apart into its alternatives: tag, type, notes."""
    origin = get_origin(annotation)
    if origin is Annotated:
        base, *more = get_args(annotation)
        yield from _members(base, (*notes, *more))
    elif origin in (Union, types.UnionType):
        for alternative in get_args(annotation):
            if alternative is not type(None):
                yield from _members(alternative, notes)
    else:
        tags = [note.tag for note in notes if isinstance(note, Tag)]
        yield (tags[-1] if tags else None, annotation, notes)


def _fields(members: list[_Member]) -> dict[str, Any]:
    """Return the fields of a table by the names that stand in the file."""
    for _, kind, _ in members:
        if isinstance(kind, type) and issubclass(kind, BaseModel):
            return {field.alias or name: field for name, field in kind.model_fields.items()}
    return {}


def _at(model: type[Table], place: Sequence[str | int]) -> list[_Member]:
    """Return what is expected at a place in a file."""
    members: list[_Member] = [(None, model, ())]
    for key in place:
        if isinstance(key, int):
            lists = [kind for _, kind, _ in members if _is_list(kind)]
            members = list(_members(get_args(lists[0])[0])) if lists else []
        elif _is_tag(key):
            members = [member for member in members if member[0] == key]
        else:
            field = _fields(members).get(key)
            members = list(_members(field.annotation, tuple(field.metadata))) if field else []
    return members
