"""The kinds of value a YAML file holds, each refusing with what was found and what is allowed.

A kind is one small class used inside ``Annotated``: it validates, and it writes its own JSON Schema, so that unit and
range stand in one place.
"""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Callable, Collection
from dataclasses import dataclass
from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Discriminator, GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

REFUSED = "refused"  # error type of everything refused here; its context holds found and allowed


def refusal(found: str, allowed: str) -> PydanticCustomError:
    """Return the error to raise for a value: what was found, what is allowed."""
    return PydanticCustomError(REFUSED, "found {found}; allowed: {allowed}", {"found": found, "allowed": allowed})


def show(value: Any) -> str:
    """Return a value as it may stand in a message: short, on one line."""
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a mapping"
    if isinstance(value, list):
        return f"a list of {len(value)}"
    text = repr(value)
    return text if len(text) <= 80 else f"{text[:60]}... ({len(text)} characters)"


class Section(BaseModel):
    """A mapping of a YAML file; keys it does not know are refused."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class Kind:
    """Base of the kinds: one validating method, one JSON Schema."""

    def take(self, value: Any) -> Any:
        """Return the value as used, or raise `refusal`."""
        raise NotImplementedError

    def json(self) -> dict[str, Any]:
        """Return the JSON Schema of the value."""
        raise NotImplementedError

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Let `take` do the checking."""
        return core_schema.no_info_plain_validator_function(self.take)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        """Let `json` describe the value."""
        return self.json()


@dataclass(frozen=True)
class Number(Kind):
    """A finite number with unit and range.

    Parameters
    ----------
    low, high : float, the range; both ends allowed
    unit : str, empty for a pure number
    """

    low: float
    high: float
    unit: str = ""

    @property
    def allowed(self) -> str:
        """What is allowed, in words."""
        bound = f"from {self.low:g} to {self.high:g}" if math.isfinite(self.high) else f"of at least {self.low:g}"
        return f"a number {bound}" + (f" [{self.unit}]" if self.unit else "")

    def take(self, value: Any) -> float:
        """Return a number as float; text, true/false, infinities and numbers outside the range are refused."""
        if isinstance(value, bool) or not isinstance(value, int | float):
            raise refusal(show(value), self.allowed)
        try:
            number = float(value)
        except OverflowError:  # a whole number of hundreds of digits
            number = math.inf
        if not math.isfinite(number) or not self.low <= number <= self.high:
            raise refusal(show(value), self.allowed)
        return number

    def json(self) -> dict[str, Any]:
        """Return type, range and unit."""
        schema: dict[str, Any] = {"type": "number", "minimum": self.low}
        if math.isfinite(self.high):
            schema["maximum"] = self.high
        return {**schema, "x-unit": self.unit} if self.unit else schema


@dataclass(frozen=True)
class Whole(Kind):
    """A whole number in a range; both ends allowed."""

    low: int
    high: int

    @property
    def allowed(self) -> str:
        """What is allowed, in words."""
        return f"a whole number from {self.low} to {self.high}"

    def take(self, value: Any) -> int:
        """Return a whole number; text, true/false and fractions are refused."""
        if isinstance(value, bool) or not isinstance(value, int) or not self.low <= value <= self.high:
            raise refusal(show(value), self.allowed)
        return value

    def json(self) -> dict[str, Any]:
        """Return type and range."""
        return {"type": "integer", "minimum": self.low, "maximum": self.high}


@dataclass(frozen=True)
class Choice(Kind):
    """One of a few words or whole numbers."""

    words: tuple[str | int, ...]

    def take(self, value: Any) -> str | int:
        """Return the word; the nearest one is offered for a slip."""
        for word in self.words:
            if type(value) is type(word) and value == word:
                return word
        allowed = " | ".join(str(word) for word in self.words)
        raise refusal(show(value), allowed + nearest(value, [word for word in self.words if isinstance(word, str)]))

    def json(self) -> dict[str, Any]:
        """Return the list of words."""
        return {"enum": list(self.words)}


@dataclass(frozen=True)
class Flag(Kind):
    """True or false."""

    def take(self, value: Any) -> bool:
        """Return true or false; numbers and words such as ``yes`` are refused."""
        if isinstance(value, bool):
            return value
        raise refusal(show(value), "true | false")

    def json(self) -> dict[str, Any]:
        """Return the type."""
        return {"type": "boolean"}


@dataclass(frozen=True)
class Text(Kind):
    """A line of text without control characters or blanks at its ends.

    Parameters
    ----------
    longest : int, most characters allowed
    of : str, what the text is, for the message
    pattern : str, a regular expression the whole text must match; empty for any
    rule : str, the pattern in words
    """

    longest: int = 200
    of: str = "text"
    pattern: str = ""
    rule: str = ""

    @property
    def allowed(self) -> str:
        """What is allowed, in words."""
        return f"{self.of} of 1 to {self.longest} characters" + (f", {self.rule}" if self.rule else "")

    def take(self, value: Any) -> str:
        """Return the text."""
        if not isinstance(value, str) or not 1 <= len(value) <= self.longest or value != value.strip():
            raise refusal(show(value), self.allowed)
        if any(unicodedata.category(character) in ("Cc", "Cs", "Cn") for character in value):
            raise refusal(show(value), f"{self.allowed}, without control characters")
        if self.pattern and not re.fullmatch(self.pattern, value):
            raise refusal(show(value), self.allowed)
        return value

    def json(self) -> dict[str, Any]:
        """Return type, length and pattern."""
        schema: dict[str, Any] = {"type": "string", "minLength": 1, "maxLength": self.longest}
        return {**schema, "pattern": f"^(?:{self.pattern})$"} if self.pattern else schema


@dataclass(frozen=True)
class Length(Kind):
    """A bound on the number of items of a list; the items are checked by the list's own type.

    Parameters
    ----------
    least, most : int, number of items allowed
    of : str, what the items are, for the message
    """

    least: int
    most: int
    of: str

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Look at the length first, then at each item."""
        return core_schema.no_info_before_validator_function(self.take, handler(source))

    def take(self, value: Any) -> Any:
        """Return a list of allowed length as it is; anything else is refused."""
        bound = f"{self.least}" if self.least == self.most else f"{self.least} to {self.most}"
        if not isinstance(value, list) or not self.least <= len(value) <= self.most:
            raise refusal(show(value), f"a list of {bound} {self.of}")
        return value

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        """Add the bounds to the list's own schema."""
        return {**handler(schema), "minItems": self.least, "maxItems": self.most}


#: A slip is looked for among so many names; with more it would take longer than it helps.
MOST_NAMES = 300
#: As many problems of one kind are told; a file with more wants another look as a whole.
MOST_PROBLEMS = 1000


def quoted(key: Any) -> str:
    """Return a key as it may stand in a message: short, in backquotes."""
    text = str(key)
    return f"`{text}`" if len(text) <= 80 else f"`{text[:60]}...` ({len(text)} characters)"


def nearest(word: Any, words: Collection[str]) -> str:
    """Return `` (did you mean `x`?)`` for the valid name nearest to a slip, or nothing."""
    import difflib  # only needed once something is wrong

    if not isinstance(word, str) or len(words) > MOST_NAMES:
        return ""
    by_folded = {name.casefold(): name for name in words}
    close = difflib.get_close_matches(word.casefold(), by_folded, n=1, cutoff=0.6)
    return f" (did you mean `{by_folded[close[0]]}`?)" if close else ""


def by(choose: Callable[[Any], str]) -> Discriminator:
    """Return what picks among the tagged forms of a value; tags stand in angle brackets and never show in messages."""
    return Discriminator(lambda value: f"<{choose(value)}>")


def one_or_list(value: Any) -> str:
    """Tell a list from a single value."""
    return "list" if isinstance(value, list) else "one"


MONTHS = 12


@dataclass(frozen=True)
class Monthly(Number):
    """A value over the year: one number, or twelve, January first."""

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Check the one number, or the length and then each of the twelve."""
        number = core_schema.no_info_plain_validator_function(self.take)
        twelve = core_schema.no_info_before_validator_function(
            Length(MONTHS, MONTHS, "numbers, January first").take, core_schema.list_schema(number)
        )
        choices: dict[Any, Any] = {"<one>": number, "<list>": twelve}
        return core_schema.tagged_union_schema(choices, lambda value: f"<{one_or_list(value)}>")

    def json(self) -> dict[str, Any]:
        """Return either form."""
        number = super().json()
        return {"anyOf": [number, {"type": "array", "items": number, "minItems": MONTHS, "maxItems": MONTHS}]}


Name = Annotated[str, Text(200, "a name")]


def folded(name: str) -> str:
    """Return a name as names are told apart: without case and without forms that look alike."""
    return unicodedata.normalize("NFKC", unicodedata.normalize("NFKC", name).casefold())
