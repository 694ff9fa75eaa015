"""Tables of files: frozen records that say in plain words what is wrong with them, and names that are safe to use."""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable
from typing import Annotated, Any

from pydantic import AfterValidator, BaseModel, ConfigDict, ValidationError, model_validator
from pydantic_core import InitErrorDetails, PydanticCustomError


def nearest(word: str, words: list[str]) -> str:
    """ " (did you mean ...?)" for the nearest known word, or nothing."""
    close = difflib.get_close_matches(word, words, n=1, cutoff=0.6)
    return f' (did you mean "{close[0]}"?)' if close else ""


def shortened(text: str) -> str:
    """A word of a file for a message, cut where it is longer than any name."""
    return text if len(text) <= 60 else text[:60] + "..."


def shown(value: Any) -> str:
    """What a file holds, for a message: as it stands there where that is short."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list | tuple):
        return "a list"
    if isinstance(value, str):
        return repr(shortened(value))
    return str(value)  # a number, a date or a time


def named_like(kind: str) -> str:
    """A kind with its article."""
    return f"{'an' if kind[0] in 'aeiou' or kind[:2] in ('n-', 'r-') else 'a'} {kind}"


class Record(BaseModel):
    """A table of a file: frozen, unknown keys refused with the nearest known one."""

    model_config = ConfigDict(frozen=True, extra="forbid", arbitrary_types_allowed=True)

    @model_validator(mode="wrap")
    @classmethod
    def _in_plain_words(cls, value: Any, handler: Callable[[Any], Any]) -> Any:
        """Say of each mistake what is allowed; done here since only here the class is at hand."""
        try:
            return handler(value)
        except ValidationError as err:
            known = [field.alias or name for name, field in cls.model_fields.items()]
            errors = err.errors(include_url=False)
            # A list whose only entry is wrong counts as empty; the entry's own mistake says enough.
            inside = {e["loc"][:n] for e in errors for n in range(1, len(e["loc"]))}
            raise ValidationError.from_exception_data(
                cls.__name__,
                [_reworded(e, known) for e in errors if e["type"] != "too_short" or e["loc"] not in inside],
            ) from None


def _reworded(error: Any, known: list[str]) -> InitErrorDetails:
    """One pydantic error in the project's words: what was found, what is allowed, the nearest known word."""
    kind, loc, found, ctx = error["type"], error["loc"], shown(error["input"]), error.get("ctx", {})
    if kind in ("model_type", "model_attributes_type") and not loc:
        # The table around this one knows the key; it rewords the error.
        return InitErrorDetails(type=kind, loc=loc, input=error["input"], ctx=ctx)
    key = shortened(str(loc[-1])) if loc else ""
    expected = re.findall(r"'([^']*)'", str(ctx.get("expected", ctx.get("expected_tags", ""))))
    allowed = ", ".join(f'"{word}"' for word in expected)
    text = error["msg"].removeprefix("Value error, ")
    if kind == "extra_forbidden":
        text = f'"{key}" is not known here{nearest(key, known)}; known: {", ".join(known)}'
    elif kind == "missing":
        text = f'"{key}" is missing'
    elif kind == "literal_error":
        text = (
            f'{found} is not allowed for "{key}"{nearest(shortened(str(error["input"])), expected)}; allowed: {allowed}'
        )
    elif kind == "union_tag_invalid":
        tag = shortened(str(ctx.get("tag", "")))
        text = f'kind "{tag}" is not known for "{key}"{nearest(tag, expected)}; known: {allowed}'
    elif kind == "union_tag_not_found":
        text = f'"{key}" needs a "kind"'
    elif kind in ("model_type", "model_attributes_type", "dict_type"):
        text = f'"{key}" must be a table, such as {{ ... }}; found {found}'
    elif kind == "int_type":
        text = f'"{key}" must be a whole number without unit or quotes; found {found}'
    elif kind in ("greater_than_equal", "less_than_equal"):
        bound = f"{ctx['ge']} or more" if "ge" in ctx else f"{ctx['le']} or less"
        text = f'"{key}" must be {bound}; found {found}'
    elif kind == "too_short":
        text = f'"{key}" is empty; it needs at least {ctx["min_length"]} {"entry" if ctx["min_length"] == 1 else "entries"}'
    elif kind in ("string_type", "tuple_type", "list_type"):
        what = "text in quotes" if kind == "string_type" else "a list in [ ]"
        text = f'"{key}" must be {what}; found {found}'
    return InitErrorDetails(type=PydanticCustomError("said", "{said}", {"said": text}), loc=loc, input=error["input"])


def _safe(text: str) -> str:
    """Names go into reports and file names: letters, digits, blanks and a few signs, on one line."""
    if not re.fullmatch(_NAME, text):
        raise PydanticCustomError(
            "unsafe_name",
            "{text} cannot be a name: use up to 60 letters, digits, blanks and _ + - ( ) # / , . { }, starting with a letter or digit",
            {"text": repr(shortened(text))},
        )
    return text


def name_from(text: str, otherwise: str) -> str:
    """A name made from that of a file or folder, which may hold anything."""
    kept = "".join(c if re.fullmatch(r"[\w +\-()#/,.{}]", c) else "-" for c in text).lstrip("_ +-()#/,.{}")[:60]
    return kept if re.fullmatch(_NAME, kept) else otherwise


_NAME = r"[^\W_][\w +\-()#/,.{}]{0,59}"
Name = Annotated[str, AfterValidator(_safe)]


def said(text: str) -> PydanticCustomError:
    """A mistake in the project's own words."""
    return PydanticCustomError("said", "{said}", {"said": text})
