"""A node's parameters from its pydantic model: declared with type, range and sentence, checked."""

from collections.abc import Mapping, Sequence
from typing import Any, get_args, TypeVar

from annotated_types import Ge, Le
from pydantic import BaseModel, ConfigDict, Field, ValidationError
from pydantic.fields import FieldInfo
from rcl_interfaces.msg import FloatingPointRange, IntegerRange, ParameterDescriptor
from rclpy.exceptions import InvalidParameterTypeException
from rclpy.node import Node

from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.key_hints import unknown_key_hint
from suspended_ctrl.rig.yaml_file import read_text
from suspended_ctrl.rig.yaml_tree import parse, value_text

# Declared by rclpy for every node.
RCLPY_PARAMETERS = ('use_sim_time', 'start_type_description_service')

_TYPE_WORDS = {float: 'a number', int: 'a whole number', bool: 'true or false', str: 'text'}
_RUN_TIME = 'run_time'


class NodeParameters(BaseModel):
    """What every node has; a field's type, bounds and description make its descriptor."""

    model_config = ConfigDict(frozen=True, extra='forbid', strict=True, allow_inf_nan=False)

    rig: str = Field('bay_head', description='Rig file: a name that comes with the package, '
                     'or a path.')
    activate: bool = Field(True, description='Whether the node configures and activates itself.')


_Model = TypeVar('_Model', bound=NodeParameters)


def run_time(default: str, description: str) -> Any:
    """Field of a parameter that may be set while the node runs."""
    return Field(default, description=description, json_schema_extra={_RUN_TIME: True})


def may_change(field: FieldInfo) -> bool:
    """Whether a parameter may be set while the node runs."""
    extra = field.json_schema_extra
    return isinstance(extra, Mapping) and bool(extra.get(_RUN_TIME))


def _bounds(field: FieldInfo) -> tuple[float | None, float | None]:
    lower = upper = None
    for constraint in field.metadata:
        if isinstance(constraint, Ge):
            lower = constraint.ge
        elif isinstance(constraint, Le):
            upper = constraint.le
    return lower, upper  # type: ignore[return-value]


def descriptor(name: str, field: FieldInfo) -> ParameterDescriptor:
    """
    Describe a parameter for introspection and for rclpy's own checks.

    Parameters
    ----------
    name : str
        As in the graph.
    field : pydantic field
        Bounds, where there are any, are inclusive and given on both sides.

    Returns
    -------
    rcl_interfaces.msg.ParameterDescriptor

    """
    made = ParameterDescriptor(
        name=name, description=field.description or '', read_only=not may_change(field),
        additional_constraints=allowed(field) if get_args(field.annotation) else '')
    lower, upper = _bounds(field)
    if lower is not None and upper is not None:
        if field.annotation is int:
            made.integer_range = [IntegerRange(from_value=int(lower), to_value=int(upper), step=1)]
        else:
            made.floating_point_range = [
                FloatingPointRange(from_value=float(lower), to_value=float(upper), step=0.0)]
    return made


def allowed(field: FieldInfo) -> str:
    """Say what a parameter may be."""
    if choices := get_args(field.annotation):
        return f'one of {", ".join(choices)}'
    words = _TYPE_WORDS.get(field.annotation, '')  # type: ignore[arg-type]
    lower, upper = _bounds(field)
    return words if lower is None else f'{words} from {lower:g} to {upper:g}'


def check(model: type[_Model], given: Mapping[str, Any], where: str) -> _Model:
    """
    Turn values as they came into a node's parameters.

    A whole number stands for the same floating-point number where one is wanted.

    Parameters
    ----------
    model : subclass of NodeParameters
        The model of the parameters.
    given : mapping of str to object
        Values as they came.
    where : str
        What holds them, for messages: a node's name or a file's.

    Returns
    -------
    NodeParameters

    Raises
    ------
    InputError
        For a key that is not declared, a value of another type or out of its range.

    """
    for name, value in given.items():
        if name in RCLPY_PARAMETERS:
            continue
        if name not in model.model_fields:
            raise InputError(f'{where}: {name}: value {value_text(value)}: '
                             f'{unknown_key_hint(name, list(model.model_fields))}')
    own = {name: value for name, value in given.items() if name not in RCLPY_PARAMETERS}
    try:
        return model.model_validate(own)
    except ValidationError as error:
        name = str(error.errors()[0]['loc'][0])
    raise InputError(f'{where}: {name}: value {value_text(own[name])}: '
                     f'{allowed(model.model_fields[name])}')


def declare(node: Node, model: type[_Model]) -> _Model:
    """
    Declare a node's parameters with the values it was started with.

    Parameters
    ----------
    node : Node
        Made with ``automatically_declare_parameters_from_overrides``: that is how values that
        nobody declared can be seen at all, rclpy ignores them otherwise.
    model : subclass of NodeParameters
        The model of the parameters.

    Returns
    -------
    NodeParameters

    Raises
    ------
    InputError
        As ``check``.

    """
    given = {name: parameter.value for name, parameter in
             node.get_parameters_by_prefix('').items()}
    parameters = check(model, given, node.get_name())
    for name, field in model.model_fields.items():
        if node.has_parameter(name):
            node.undeclare_parameter(name)
        try:
            node.declare_parameter(name, getattr(parameters, name), descriptor(name, field),
                                   ignore_override=True)
        except InvalidParameterTypeException as error:
            raise InputError(f'{node.get_name()}: {name}: {error}') from error
    return parameters


def check_seen(files: Sequence[str], name: str, namespace: str) -> None:
    """
    See that nothing meant for a node stands where ROS does not look.

    Parameters
    ----------
    files : sequence of str
        Parameter files of the call.
    name : str
        Of the executable.
    namespace : str
        Of the node; ``/`` for none.

    Raises
    ------
    InputError
        For a bare name, which ROS reads as a node without a namespace.

    """
    if namespace == '/':
        return
    for file in files:
        tree = parse(read_text(file), file)
        if name in tree.value or f'/{name}' in tree.value:
            raise InputError(f'{file}: {name}: is ignored in namespace {namespace}: '
                             f'/**/{name}')
