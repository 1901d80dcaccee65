"""What all request and answer schemas share."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Generic, TypeVar

from marshmallow import RAISE, Schema, ValidationError, missing

from ladderband.schemas.fields import Complaint, Part, Reply

Question = TypeVar("Question")


@dataclass(frozen=True, slots=True)
class Loaded(Generic[Question]):
    """A checked request: the question for the use case and the warnings raised on the way."""

    question: Question
    warnings: tuple[str, ...] = ()


class StrictSchema(Schema):
    """Unknown members are refused, and the refusal lists the known ones."""

    class Meta:
        unknown = RAISE

    exactly_one_of: tuple[str, ...] = ()
    """Members of which exactly one must be given."""

    def __init__(self, **kwargs: Any) -> None:
        super().__init__(**kwargs)
        known = ", ".join(sorted(self.fields))
        unknown = Complaint("This member is not known.", f"members: {known}")
        self._unknown = [unknown]
        self._members = [
            (name, field, field.required, field.load_default) for name, field in self.fields.items()
        ]

    def load(self, data: Any, **options: Any) -> dict[str, Any]:
        """Checked members; replaces marshmallow's engine, whose passes for hooks and for partial
        loading cost four times as much as the checks themselves in a small body.

        So there are no hooks and no ``validate=`` here: a field checks itself in ``_deserialize``,
        members together are checked where the question is built.

        Raises
        ------
        ValidationError
            Its messages name every member that is wrong, missing or unknown.
        """
        if type(data) is not dict:
            raise ValidationError([Complaint("This is not an object.", "an object")])
        loaded: dict[str, Any] = {}
        wrong: dict[str, Any] = {}
        seen = 0
        for name, field, required, default in self._members:
            if name not in data:
                if required:
                    wrong[name] = field.error_messages["required"]
                elif default is not missing:
                    loaded[name] = default
                continue
            seen += 1
            value = data[name]
            try:
                loaded[name] = _not_null(field, value)._deserialize(value, name, data)
            except ValidationError as error:
                wrong[name] = error.messages
        if seen != len(data):
            wrong |= {name: self._unknown for name in data if name not in self.fields}
        if wrong:
            raise ValidationError(wrong)
        return loaded

    def chosen(self, data: Mapping[str, Any]) -> str:
        """The one given member of ``exactly_one_of``.

        Raises
        ------
        ValidationError
            None of them, or more than one, was given.
        """
        given = [name for name in self.exactly_one_of if name in data]
        if len(given) == 1:
            return given[0]
        allowed = "exactly one of: " + ", ".join(self.exactly_one_of)
        if not given:
            detail = "One of these members is required."
            raise ValidationError({self.exactly_one_of[0]: [Complaint(detail, allowed)]})
        detail = "Give only one of " + ", ".join(given) + "."
        raise ValidationError({given[-1]: [Complaint(detail, allowed)]})


def _not_null(field: Any, value: Any) -> Any:
    if value is None:
        raise ValidationError(field.error_messages["null"])
    return field


class RequestSchema(StrictSchema, Generic[Question]):
    """A request body: ``read`` checks it and builds the question of the use case."""

    def read(self, body: Any) -> Loaded[Question]:
        """Check a parsed JSON body.

        Raises
        ------
        ValidationError
            Its messages hold a :class:`Complaint` for each member that is wrong.
        """
        notes: list[str] = []
        question = self.build(self.load(body), notes)
        return Loaded(question, tuple(notes))

    def build(self, data: dict[str, Any], notes: list[str]) -> Question:
        """The question from checked members; append to ``notes`` what the client should know."""
        raise NotImplementedError


NUMBER = {"type": "number"}
NUMBERS = {"type": "array", "items": NUMBER}
NUMBER_OR_DECIMAL = {"anyOf": [{"type": "number"}, {"type": "string"}]}
TEXTS = {"type": "array", "items": {"type": "string"}}


def array_of(items: Mapping[str, Any], dimensions: int = 1) -> dict[str, Any]:
    """JSON Schema of a nested array."""
    for _ in range(dimensions):
        items = {"type": "array", "items": items}
    return dict(items)


class AccuracySchema(StrictSchema):
    """How far the numbers beside it can be trusted."""

    bound = Reply(
        "|true - value| <= bound for every number; an array has one entry a table or a number.",
        {"anyOf": [{"type": "number", "minimum": 0}, array_of({"type": "number", "minimum": 0})]},
    )
    evidence = Reply(
        "proven: the bound has a proof. estimated: it has none.",
        {"type": "string", "enum": ["proven", "estimated"]},
    )
    route = Reply("The algorithm that answered.", {"type": "string"})


class CompletenessSchema(StrictSchema):
    """What a truncated answer holds, and what it leaves out at most."""

    captured = Reply("Sum of the intensities returned.", NUMBER)
    total = Reply("What a complete answer sums to.", NUMBER)
    missing_at_most = Reply("Proven upper limit of total - captured, rounding included.", NUMBER)


class AnswerSchema(StrictSchema):
    """Members every answer carries."""

    warnings = Reply("What the client should know; usually empty.", TEXTS)
    service_version = Reply("Version of the program that answered.", {"type": "string"})
    request_digest = Reply("Hash of the checked request and the version.", {"type": "string"})


def accuracy_part(description: str = "How far the numbers can be trusted.") -> Part:
    """The ``accuracy`` member of an answer."""
    return Part(AccuracySchema, description, required=True)


def completeness_part() -> Part:
    """The ``completeness`` member of a truncated answer."""
    return Part(CompletenessSchema, "What the list holds and leaves out.", required=True)


def complaints(messages: Any, pointer: str = "") -> Iterator[tuple[str, Complaint]]:
    """Flatten marshmallow's nested messages to (JSON pointer, complaint), in the order found."""
    if isinstance(messages, dict):
        for key, inner in messages.items():
            yield from complaints(
                inner, pointer if key == "_schema" else f"{pointer}/{escaped(key)}"
            )
    elif isinstance(messages, (list, tuple)):
        for inner in messages:
            yield from complaints(inner, pointer)
    elif isinstance(messages, Complaint):
        yield pointer, messages
    else:
        yield pointer, Complaint(str(messages))


def escaped(key: Any) -> str:
    """One reference token of a JSON pointer (RFC 6901, section 3), cut to 80 characters."""
    return str(key)[:80].replace("~", "~0").replace("/", "~1")
