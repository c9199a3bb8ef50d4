"""What may be asked of a run, checked before anything is done."""

from __future__ import annotations

from typing import Annotated, Literal, get_args

from pydantic import BaseModel, ConfigDict, Field, TypeAdapter, ValidationError, model_validator

from tagstream.marks import Value, key_problem, value_problem
from tagstream.units import TIME_LIMIT_PS

MOST_BYTES = 65_536  # of a request
_RIGHT = {
    "key": "a text",
    "value": "a number or a text",
    "at_ps": "stream time, a whole number of ps below 106 days",
}


class _Checked(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, strict=True)


class PlainRequest(_Checked):
    """A request that needs nothing but its name."""

    request: Literal["status", "new-run", "restart-spans", "stop"]


class MarkRequest(_Checked):
    """From now on, or from stream time `at_ps`, `key` has `value`."""

    request: Literal["mark"]
    key: str
    value: Value
    at_ps: Annotated[int, Field(ge=0, le=TIME_LIMIT_PS)] | None = None

    @model_validator(mode="after")
    def _check(self) -> MarkRequest:
        if problem := key_problem(self.key) or value_problem(self.key, self.value):
            raise ValueError(problem)
        return self


Request = PlainRequest | MarkRequest
_ANY: TypeAdapter[Request] = TypeAdapter(Annotated[Request, Field(discriminator="request")])


class BadRequestError(Exception):
    """A request that says nothing understandable; the text says what would be right."""


def parsed(text: bytes) -> Request:
    """The request in a message. Raises BadRequestError."""
    try:
        return _ANY.validate_json(text)
    except ValidationError as error:
        raise BadRequestError(_sentence(error)) from None


def mark_request(key: str, value: Value, at_ps: int | None = None) -> MarkRequest:
    """The request for a mark. Raises BadRequestError."""
    try:
        return MarkRequest(request="mark", key=key, value=value, at_ps=at_ps)
    except ValidationError as error:
        raise BadRequestError(_sentence(error, "mark")) from None


def as_message(request: Request) -> bytes:
    """A request as it is sent."""
    return request.model_dump_json(exclude_none=True).encode()


def _sentence(error: ValidationError, *known: str) -> str:
    """The first thing that is wrong, with its key, and what would be right.

    known: the name of the request, where it is not part of what was checked.
    """
    detail = error.errors(include_url=False, include_input=False)[0]
    kind, loc = detail["type"], (*known, *detail["loc"])
    if kind == "json_invalid":
        return f"no JSON: {detail['ctx']['error']}"
    if kind == "value_error":
        return str(detail["ctx"]["error"])
    if len(loc) < 2:  # no request that we know
        return f'right would be an object with "request": {_listed(_names())}'
    key = str(loc[1])
    if kind == "extra_forbidden":
        model = MarkRequest if loc[0] == "mark" else PlainRequest
        return f'{key}: unknown key of "{loc[0]}"; known are {", ".join(model.model_fields)}'
    if kind == "missing":
        return f"{key}: missing; it must be given"
    return f"{key}: right would be {_RIGHT[key]}"


def _names() -> list[str]:
    models: tuple[type[BaseModel], ...] = (PlainRequest, MarkRequest)
    return [name for m in models for name in get_args(m.model_fields["request"].annotation)]


def _listed(names: list[str]) -> str:
    return ", ".join(f'"{name}"' for name in names[:-1]) + f' or "{names[-1]}"'
