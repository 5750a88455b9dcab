"""Building blocks of the models that say what a file may hold."""

from collections.abc import Mapping
import math
from typing import Annotated, Any, NoReturn

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, model_validator
from pydantic_core import PydanticCustomError

from suspended_ctrl.rig.key_hints import unknown_key_hint

# No quantity of a rig or mission comes near it in SI; beyond, squares and products would overflow.
MAGNITUDE_MAX = 1.0e9

Key = str | int


def refuse(key: Key | tuple[Key, ...], value: object, allowed: str) -> NoReturn:
    """
    Refuse a value from inside a validator.

    Parameters
    ----------
    key : str, int or tuple of them
        Where the value stands, from the section or list that the validator belongs to; an empty
        tuple for that itself.
    value : object
        What stands there; the file's own text is shown, but where this is
        text and the file holds something else, this is.
    allowed : str
        What may stand there.

    Raises
    ------
    PydanticCustomError
        Always; ``read_file`` turns it into an ``InputError``.

    """
    path = key if isinstance(key, tuple) else (key,)
    raise PydanticCustomError('refused', 'refused', {'key': path, 'value': value,
                                                     'allowed': allowed})


class Section(BaseModel):
    """A mapping in a file: known keys only, nothing converted, not changed once read."""

    model_config = ConfigDict(frozen=True, extra='forbid', strict=True, allow_inf_nan=False)

    @model_validator(mode='before')
    @classmethod
    def _known_keys(cls, data: Any) -> Any:
        if isinstance(data, cls):
            return data
        names = [field.alias or name for name, field in cls.model_fields.items()]
        if not isinstance(data, Mapping):
            refuse((), data, 'a mapping with keys ' + ', '.join(names))
        for key in data:
            if key not in names:
                refuse(str(key), data[key], unknown_key_hint(str(key), names))
        return data


def _sign(value: Any) -> Any:
    # Literal[1, -1] would let true pass, which equals 1.
    if type(value) is not int or abs(value) != 1:
        refuse((), value, '1 or -1')
    return value


def _ordered(pair: tuple[float, ...]) -> tuple[float, ...]:
    if not pair[0] < pair[1]:
        refuse((), pair, '[lower, upper] with lower below upper')
    return pair


def _unit_length(vector: tuple[float, ...]) -> tuple[float, ...]:
    largest = max(abs(x) for x in vector)
    if largest == 0.0:
        refuse((), vector, 'at least one number that is not zero')
    # Scaled first, so that squares of tiny numbers do not vanish.
    scaled = [x / largest for x in vector]
    length = math.sqrt(sum(x * x for x in scaled))
    return tuple(x / length for x in scaled)


Number = Annotated[float, Field(ge=-MAGNITUDE_MAX, le=MAGNITUDE_MAX)]
Positive = Annotated[float, Field(gt=0.0, le=MAGNITUDE_MAX)]
NonNegative = Annotated[float, Field(ge=0.0, le=MAGNITUDE_MAX)]
UnitFraction = Annotated[float, Field(ge=0.0, le=1.0)]
Sign = Annotated[int, BeforeValidator(_sign)]
Count = Annotated[int, Field(ge=1)]
Name = Annotated[str, Field(pattern=r'^\w[\w .-]{0,63}$')]
Vector3 = Annotated[tuple[Number, ...], Field(min_length=3, max_length=3)]
NonNegative3 = Annotated[tuple[NonNegative, ...], Field(min_length=3, max_length=3)]
# Scaled to length one.
Direction = Annotated[Vector3, AfterValidator(_unit_length)]
Rotation = Annotated[tuple[Number, ...], Field(min_length=4, max_length=4),
                     AfterValidator(_unit_length)]
Range = Annotated[tuple[Number, ...], Field(min_length=2, max_length=2), AfterValidator(_ordered)]
