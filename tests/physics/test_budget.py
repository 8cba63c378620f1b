"""Uncertainty budgets against the GUM and an independent library."""

import GTC
import numpy as np
import pytest

from eastfall.physics.budget import Contribution, budget, combine, covariance, expanded
from eastfall.physics.errors import ParameterError


@pytest.mark.published
def test_root_sum_of_squares_of_the_gauge_block_example():
    """JCGM 100:2008, H.1: 25, 9.7, 2.9 and 16.6 nm combine to 32 nm (from memory, unconfirmed)."""
    parts = [Contribution(name=str(u), east=u * 1e-9, north=0.0) for u in (25.0, 9.7, 2.9, 16.6)]
    assert combine(parts)[0] == pytest.approx(32e-9, abs=0.5e-9)


@pytest.mark.independent
def test_combination_agrees_with_gtc():
    """Offset north = depth · sin(tilt + zero) · scale, by GTC and by contributions from the same sensitivities."""
    depth, tilt = 400.0, 2e-3
    z, a, q = GTC.ureal(0.0, 1.7e-5, label="zero"), GTC.ureal(tilt, 3.5e-5), GTC.ureal(1.0, 1e-3)
    reference = depth * GTC.sin(a + z) * q
    parts = [
        Contribution(name="zero", east=0.0, north=depth * np.cos(tilt) * 1.7e-5),
        Contribution(name="tilt", east=0.0, north=depth * np.cos(tilt) * 3.5e-5),
        Contribution(name="scale", east=0.0, north=depth * np.sin(tilt) * 1e-3),
    ]
    assert combine(parts)[1] == pytest.approx(reference.u, rel=1e-14)
    shares = {row.name: row.share for row in budget(parts).rows}
    assert shares["zero"] == pytest.approx((GTC.component(reference, z) / reference.u) ** 2, rel=1e-12)


@pytest.mark.independent
def test_covariance_of_a_shared_input_agrees_with_gtc():
    """One azimuth turns east and north together; GTC gives the same covariance."""
    length, azimuth = GTC.ureal(3.0, 0.01), GTC.ureal(0.6, 0.02)
    east, north = length * GTC.sin(azimuth), length * GTC.cos(azimuth)
    parts = [
        Contribution(name="length", east=np.sin(0.6) * 0.01, north=np.cos(0.6) * 0.01),
        Contribution(name="azimuth", east=3.0 * np.cos(0.6) * 0.02, north=-3.0 * np.sin(0.6) * 0.02),
    ]
    found = covariance(parts)
    assert found[0, 0] == pytest.approx(east.u**2, rel=1e-13)
    assert found[1, 1] == pytest.approx(north.u**2, rel=1e-13)
    assert found[0, 1] == pytest.approx(GTC.get_covariance(east, north), rel=1e-13)


@pytest.mark.invariant
def test_rows_come_by_share_and_add_up():
    """The largest share stands first, shares add to one, signs do not show, U is twice u."""
    depth = np.array([10.0, 100.0])
    parts = [
        Contribution(name="small", east=1e-3, north=0.0),
        Contribution(name="zero", east=-1e-4 * depth, north=2e-4 * depth),
        Contribution(name="nothing", east=0.0, north=0.0),
    ]
    table = budget(parts, at=1)
    assert [row.name for row in table.rows] == ["zero", "small", "nothing"]
    assert sum(row.share for row in table.rows) == pytest.approx(1.0)
    assert table.rows[0].east == pytest.approx(0.01)
    assert (table.east, table.north) == pytest.approx(
        [one[1] for one in np.broadcast_arrays(*combine(parts))]
    )
    assert table.expanded_north == pytest.approx(2.0 * table.north)
    assert expanded(table.east) == table.expanded_east


def test_a_depth_must_be_chosen_where_there_are_several():
    """Values by depth without an index raise with the contribution's name."""
    with pytest.raises(ParameterError, match="'zero' has 2 values"):
        budget([Contribution(name="zero", east=np.zeros(2), north=0.0)])


def test_nothing_contributes_nothing_and_missing_stays_missing():
    """No contributions are zero uncertainty; NaN is not hidden."""
    assert combine([]) == (0.0, 0.0)
    assert budget([]).rows == ()
    assert np.isnan(combine([Contribution(name="x", east=np.nan, north=0.0)])[0])
