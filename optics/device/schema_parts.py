"""What the models of the case file share: ranges, strictness, choice of a kind by its keys."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Field

NAME_PATTERN = r"^[A-Za-z0-9_-]+$"
TAG_MARK = "kind:"

Name = Annotated[str, Field(pattern=NAME_PATTERN)]
Positive = Annotated[float, Field(gt=0)]
AtLeastZero = Annotated[float, Field(ge=0)]
# Energies in eV and strengths of oscillators; squares of far larger ones would overflow.
ModelNumber = Annotated[float, Field(ge=0, le=1e6)]
# Beyond a centimeter a film is no coherent film any more; below a millionth of a nanometer a zone
# is a point.
Thickness = Annotated[float, Field(ge=0, le=1e7)]
ZoneLength = Annotated[float, Field(ge=1e-6)]
Share = Annotated[float, Field(ge=0, le=1)]
PositiveShare = Annotated[float, Field(gt=0, le=1)]
FaceName = Literal["top", "bottom"]


class Part(BaseModel):
    """A table of the case file: no unknown keys, no conversion of types, no inf or nan."""

    model_config = ConfigDict(extra="forbid", strict=True, allow_inf_nan=False, frozen=True)


def kinds(expected: str, **triggers: tuple[str, ...]) -> Discriminator:
    """Choose a model by the keys that are present; exactly one kind may be.

    Parameters
    ----------
    expected : str
        What a message says belongs there.
    **triggers : tuple of str
        For every kind the keys that tell it.
    """

    def choose(value: Any) -> str | None:
        # pydantic asks for parsed parts too, when it writes a document.
        present = type(value).model_fields if isinstance(value, Part) else value
        if not isinstance(present, dict):
            return None
        found = [kind for kind, keys in triggers.items() if any(key in present for key in keys)]
        return TAG_MARK + found[0] if len(found) == 1 else None

    options = " ".join(key for keys in triggers.values() for key in keys)
    return Discriminator(
        choose,
        custom_error_type="kind",
        custom_error_message="kind",
        custom_error_context={"expected": expected, "options": options, "key": ""},
    )
