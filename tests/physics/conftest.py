"""Assumptions that several tests start from."""

import sys
from dataclasses import replace
from math import radians
from pathlib import Path

import pytest

from eastfall.physics.settings import Air, Assumptions, Body, Instrument, Limits, Line, Run, Shaft, Site

sys.path.insert(0, str(Path(__file__).parent))  # the folder of the tests is no package


def assumptions(kind="guided", *, latitude=57.3, depth=300.0, **changes):
    """Give assumptions of an invented shaft, with sections exchanged by name."""
    base = Assumptions(
        site=Site(name="Marram Pit", latitude=radians(latitude), elevation=210.0, gravity=9.8167),
        shaft=Shaft(depth=depth, diameter=6.0),
        run=Run(kind=kind),
        line=Line(mass_per_length=0.006165),
        body=Body(mass=0.514, diameter=0.05),
        air=Air(temperature=281.15),
        instrument=Instrument(),
        limits=Limits(),
    )
    return replace(base, **changes)


@pytest.fixture
def shaft():
    """Give the maker of assumptions."""
    return assumptions
