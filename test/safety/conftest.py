"""Rigs for the tests of the supervisor."""

from cell import Cell
import pytest

from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.rig import Rig


@pytest.fixture(scope='session')
def bay_head() -> Rig:
    return load_rig('bay_head')


@pytest.fixture(scope='session')
def seam_head() -> Rig:
    return load_rig('seam_head')


@pytest.fixture
def cell(bay_head: Rig) -> Cell:
    return Cell(bay_head)


@pytest.fixture
def live(bay_head: Rig) -> Cell:
    return Cell(bay_head).go_live()
