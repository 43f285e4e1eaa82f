"""What the tests of several rooms share: the demo plant's design, built once."""

from __future__ import annotations

import pytest

from gateway.design import PlantDesign, build_design
from gateway.plantfile import read_plant
from gateway.service import warm_up
from tests.gateway.virtual import TARN_ROW, Rig


@pytest.fixture(scope="session")
def tarn_row() -> PlantDesign:
    """Give Tarn Row's design with warm kernels; frozen, so that tests may share it."""
    design = build_design(read_plant(TARN_ROW))
    warm_up(design)
    return design


@pytest.fixture
def rig(tarn_row: PlantDesign) -> Rig:
    """Give a run that drives Tarn Row with full authority, before its first period."""
    return Rig(tarn_row)
