"""What the validation found -> one clear message that names the keys."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from functools import partial
from typing import Annotated, Any, get_args, get_origin

from pydantic import BaseModel, ValidationError

from fluxmesh.case.problems import Problem, ProblemList, dotted
from fluxmesh.errors import CaseError, FluxmeshError, InputError, UnitError
from fluxmesh.units.wording import described, either, nearest, quoted

__all__ = ["case_error"]

_Told = Callable[[], tuple[Problem, type[InputError]]]
_MOST_SHOWN = 10


def case_error(error: ValidationError, model: type[BaseModel], file: str) -> InputError:
    """Turn a failed validation into the error that a user sees.

    Parameters
    ----------
    error : ValidationError
        As pydantic raised it.
    model : type of BaseModel
        The model that was validated.
    file : str
        Name of the case file.

    Returns
    -------
    InputError
        A `UnitError` when one quantity is at fault, else a `CaseError`; up to
        ten problems in one message, in the order of their keys.
    """
    found: list[tuple[str, _Told]] = []
    for entry in error.errors(include_url=False):
        found.extend(_problems(entry, model))
    found.sort(key=lambda pair: pair[0])
    # words are sought for those alone that are shown: a case may have a hundred thousand unknown keys
    shown = [told() for _, told in found[:_MOST_SHOWN]]
    if len(found) == 1:
        problem, kind = shown[0]
        return kind(problem.found, where=f"{file}: {problem.key}" if problem.key else file, remedy=problem.remedy)
    lines = [f"  {problem}" for problem, _ in shown]
    if len(found) > _MOST_SHOWN:
        lines.append(f"  and {len(found) - _MOST_SHOWN} more")
    return CaseError("\n".join([f"{len(found)} things are wrong", *lines]), where=file)


def _problems(entry: Any, model: type[BaseModel]) -> Iterator[tuple[str, _Told]]:
    """Translate one entry of pydantic's list: key by key, what tells the problem."""
    location: tuple[str | int, ...] = entry["loc"]
    raised = entry.get("ctx", {}).get("error")
    key = dotted(*location)
    if isinstance(raised, ProblemList):
        for problem in raised.problems:
            yield problem.key, partial(_as_it_is, problem, CaseError)
    elif isinstance(raised, FluxmeshError):
        kind = UnitError if isinstance(raised, UnitError) else CaseError
        yield key, partial(_as_it_is, Problem(key, raised.found, raised.remedy), kind)
    else:
        yield key, lambda: (_plain_problem(entry, location, model), CaseError)


def _as_it_is(problem: Problem, kind: type[InputError]) -> tuple[Problem, type[InputError]]:
    return problem, kind


def _plain_problem(entry: Any, location: Sequence[str | int], model: type[BaseModel]) -> Problem:
    key = dotted(*location)
    kind, value = entry["type"], entry["input"]
    if kind == "extra_forbidden":
        return _unknown_key(location, model)
    parent = _table_at(model, location[:-1])
    field = parent.model_fields.get(str(location[-1])) if parent and location else None
    advice = f"Give {field.description}" if field and field.description else ""
    if kind == "missing":
        return Problem(key, "missing", advice)
    if kind in ("literal_error", "enum"):
        allowed = str(entry["ctx"]["expected"]).replace("'", '"')
        return Problem(key, f"found {described(value)}", advice or f"Allowed: {allowed}")
    if kind in ("model_type", "dict_type", "model_attributes_type"):
        table = _table_at(model, location)
        keys = f" with keys such as {either(table.model_fields)}" if table else ""
        return Problem(key, f"found {described(value)}, not a table", f"Write a table{keys}")
    if kind == "bool_type":
        return Problem(key, f"found {described(value)}", "Write true or false")
    return Problem(key, f"found {described(value)}", entry["msg"])


def _unknown_key(location: Sequence[str | int], model: type[BaseModel]) -> Problem:
    table = _table_at(model, location[:-1])
    word = str(location[-1])
    allowed = list(table.model_fields) if table else []
    close = nearest(word, allowed)
    inside = f"in [{dotted(*location[:-1])}]" if len(location) > 1 else "here"
    remedy = f"Did you mean {quoted(close)}? " if close else _elsewhere(word, model)
    return Problem(dotted(*location), "unknown key", f"{remedy}Allowed {inside}: {', '.join(allowed)}")


def _elsewhere(word: str, model: type[BaseModel]) -> str:
    """Say where the key belongs, if anywhere."""
    if word in model.model_fields:
        return "It belongs at the top of the file, before or outside this table. "
    for name in model.model_fields:
        table = _table_at(model, [name])
        if table is not None and word in table.model_fields:
            return f"It belongs in [{name}]. "
    return ""


def _table_at(model: type[BaseModel], location: Sequence[str | int]) -> type[BaseModel] | None:
    """Find the model of the table at a place."""
    annotation: Any = model
    for part in location:
        table = _table_in(annotation)
        if table is not None:
            field = table.model_fields.get(str(part))
            annotation = field.annotation if field else None
        else:
            # a table with free names, or a list of tables: what stands under each name or number
            inner = {dict: 1, tuple: 0}
            kinds = [kind for kind in _parts(annotation) if get_origin(kind) in inner]
            annotation = get_args(kinds[0])[inner[get_origin(kinds[0])]] if kinds else None
    return _table_in(annotation)


def _parts(annotation: Any) -> tuple[Any, ...]:
    """Split ``X | None`` into its parts, without what is said of them."""
    arguments = get_args(annotation)
    parts = arguments if type(None) in arguments else (annotation,)
    return tuple(get_args(part)[0] if get_origin(part) is Annotated else part for part in parts)


def _table_in(annotation: Any) -> type[BaseModel] | None:
    for kind in _parts(annotation):
        if isinstance(kind, type) and issubclass(kind, BaseModel):
            return kind
    return None
