"""Read a fault file, and hold it to a rig."""

from dataclasses import dataclass
import os
from typing import Annotated

from pydantic import Field

from suspended_ctrl.bench.fault_kinds import (
    CarrierRunaway,
    CarrierStall,
    Fault,
    ImuBiasStep,
    ImuGone,
    MessageFlood,
    RotorDead,
    RotorStuck,
    RotorWeak,
    TelemetryGone,
)
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.rig.section import Section
from suspended_ctrl.rig.shared_files import find_file
from suspended_ctrl.rig.yaml_file import read_text, read_tree
from suspended_ctrl.rig.yaml_tree import key_text, parse, value_text


class FaultFile(Section):
    """A whole fault file."""

    faults: tuple[Annotated[Fault, Field(discriminator='kind')], ...]


def load_faults(path_or_name: str | os.PathLike[str], rig: Rig,
                relative_to: str | os.PathLike[str] | None = None) -> tuple[Fault, ...]:
    """
    Read and check a fault file.

    Parameters
    ----------
    path_or_name : str or path-like
        A bare name of a file that comes with the package, or a path.
    rig : Rig
        The rig that the faults befall.
    relative_to : path-like, optional
        Folder that relative paths start from; the working folder if left out.

    Returns
    -------
    tuple of faults

    Raises
    ------
    InputError
        In one line, if the file is missing, anything in it is not allowed, or the rig has no such
        rotor, axis or sensor.

    """
    path = os.fspath(find_file(path_or_name, 'faults', relative_to))
    tree = parse(read_text(path), path)
    faults = read_tree(tree, path, FaultFile).faults
    for i, fault in enumerate(faults):
        missing = not_on_rig(fault, rig)
        if missing is not None:
            place = ('faults', i, missing.key)
            raise InputError(f'{path}:{tree.line(place)}: {key_text(place)}: value '
                             f'{value_text(missing.value)}: {missing.allowed}')
    return faults


@dataclass(frozen=True)
class Missing:
    """A key of a fault whose value the rig does not have, and what is allowed there."""

    key: str
    value: str
    allowed: str


def not_on_rig(fault: Fault, rig: Rig) -> Missing | None:
    """Find what a fault speaks of and the rig has not; None if it has all."""
    key, value = '', ''
    there: tuple[str, ...] = ('',)
    if isinstance(fault, RotorDead | RotorStuck | RotorWeak):
        key, value, there = 'rotor', fault.rotor, rig.rotors.names
    elif isinstance(fault, CarrierStall | CarrierRunaway):
        key, value, there = 'axis', fault.axis, rig.carrier.axes
    elif isinstance(fault, MessageFlood):
        key, value, there = 'topic', fault.topic, topics(rig)
    elif isinstance(fault, ImuGone | ImuBiasStep) and rig.sensors.imu is None:
        return Missing('kind', fault.kind, f'a fault of what {rig.name} has, it has no imu')
    elif isinstance(fault, TelemetryGone) and rig.sensors.rotor_states is None:
        return Missing('kind', fault.kind,
                       f'a fault of what {rig.name} has, it has no rotor_states')
    if value in there:
        return None
    return Missing(key, value, f'one of {", ".join(there)}' if there
                   else f'a fault of what {rig.name} has, it has no {key}')


def topics(rig: Rig) -> tuple[str, ...]:
    """Topics that a bench of this rig publishes measurements on."""
    sensors = rig.sensors
    there = {'pose': True, 'imu': sensors.imu is not None,
             'rotor_states': sensors.rotor_states is not None,
             'carrier_states': sensors.carrier_states is not None and bool(rig.carrier.axes),
             'tether_load': sensors.tether_load is not None, 'emergency_stop': True}
    return tuple(name for name, present in there.items() if present)
