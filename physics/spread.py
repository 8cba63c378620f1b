"""How release errors spread the landing of a falling body.

One fall and ensembles of falls come from `fall`; the uncertainty of the expected curve is reckoned elsewhere, and what
the wall does is `wall`.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from eastfall.physics.air import AirColumn
from eastfall.physics.budget import covariance
from eastfall.physics.earth import Array
from eastfall.physics.ensemble import COARSE
from eastfall.physics.errors import ParameterError
from eastfall.physics.fall import Release, Variation, fall_ensemble
from eastfall.physics.field import LocalField
from eastfall.physics.settings import Body

SAMPLING = 1e-7
"""To which Monte Carlo members are iterated [m]; far below the sampling error of any number of them."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LandingSpread:
    """Spread of repeated drops about the undisturbed fall, by depth.

    Parameters
    ----------
    depth : array, shape (depths,)
        [m]
    covariance : array, shape (depths, 2, 2)
        Of (east, north) [m²].
    """

    depth: Array
    covariance: Array

    @property
    def u_east(self) -> Array:
        """Standard deviation toward east [m], shape (depths,)."""
        return np.sqrt(self.covariance[:, 0, 0])

    @property
    def u_north(self) -> Array:
        """Standard deviation toward north [m], shape (depths,)."""
        return np.sqrt(self.covariance[:, 1, 1])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Landings:
    """Monte Carlo drops.

    Parameters
    ----------
    depth : array, shape (depths,)
        [m]
    east, north : array, shape (drops, depths)
        Offset from the straight vertical [m].
    """

    depth: Array
    east: Array
    north: Array

    def spread(self) -> LandingSpread:
        """Covariance of the drops about their mean."""
        apart = np.stack([self.east, self.north]) - np.stack([self.east, self.north]).mean(
            axis=1, keepdims=True
        )
        covariance = np.einsum("imd,jmd->dij", apart, apart) / (len(self.east) - 1)
        return LandingSpread(depth=self.depth, covariance=covariance)


def landing_spread(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    body: Body,
    air: AirColumn | None = None,
    release: Release | None = None,
    u_spin: float = 0.0,
) -> LandingSpread:
    """Linear propagation of release errors along the path.

    Parameters
    ----------
    field : LocalField
    depths : array_like, shape (depths,)
        Rising [m].
    body : settings.Body
        Its `u_release` and `u_release_speed` hold for each horizontal component, independently.
    air : AirColumn, optional
    release : Release, optional
    u_spin : float
        Standard uncertainty of each component of the spin [rad/s].

    Returns
    -------
    LandingSpread

    Notes
    -----
    Σ c cᵀ over the errors, c half the difference between falls with the error at plus and minus one standard
    uncertainty.

    References
    ----------
    JCGM 100:2008 (GUM), section 5.1, eq. 10; JCGM 102:2011 (more than one output).
    """
    errors = (
        ("east", body.u_release),
        ("north", body.u_release),
        ("speed_east", body.u_release_speed),
        ("speed_north", body.u_release_speed),
        ("spin_east", u_spin),
        ("spin_north", u_spin),
        ("spin_down", u_spin),
    )
    active = [one for one in errors if one[1] > 0.0]
    changes = {
        name: np.array([u if name == other else 0.0 for other, _ in active] * 2)
        * np.repeat([1.0, -1.0], len(active))
        for name, u in active
    }
    falls = fall_ensemble(
        field, depths=depths, variation=Variation(**changes), body=body, air=air, release=release
    )
    if not active:
        return LandingSpread(depth=falls.depth, covariance=np.zeros((len(falls.depth), 2, 2)))
    plus, minus = np.split(np.stack([falls.east, falls.north], axis=1), 2)
    parts = 0.5 * (plus - minus)
    return LandingSpread(depth=falls.depth, covariance=covariance(parts))


def monte_carlo(
    field: LocalField,
    *,
    depths: npt.ArrayLike,
    body: Body,
    generator: np.random.Generator,
    air: AirColumn | None = None,
    release: Release | None = None,
    drops: int = 100_000,
    u_spin: float = 0.0,
) -> Landings:
    """Simulate drops with normal release errors through the full equation of motion.

    Parameters
    ----------
    field : LocalField
    depths : array_like, shape (depths,)
        Rising [m].
    body : settings.Body
        Its `u_release` and `u_release_speed` hold for each horizontal component, independently.
    generator : numpy.random.Generator
        The source of all randomness.
    air : AirColumn, optional
    release : Release, optional
    drops : int
        At least 2.
    u_spin : float
        Standard uncertainty of each component of the spin [rad/s].

    Returns
    -------
    Landings

    Raises
    ------
    ParameterError
        If fewer than two drops are asked for.

    References
    ----------
    JCGM 101:2008 (GUM Supplement 1), section 7.
    """
    if drops < 2:
        raise ParameterError("drops", drops, "", "2 or more")
    draws = generator.standard_normal((7, drops))
    spin = u_spin * draws[4:] if u_spin > 0.0 else np.zeros(3)
    variation = Variation(
        east=body.u_release * draws[0],
        north=body.u_release * draws[1],
        speed_east=body.u_release_speed * draws[2],
        speed_north=body.u_release_speed * draws[3],
        spin_east=spin[0],
        spin_north=spin[1],
        spin_down=spin[2],
    )
    falls = fall_ensemble(
        field,
        depths=depths,
        variation=variation,
        body=body,
        air=air,
        release=release,
        tolerance=SAMPLING,
        rule=COARSE,
    )
    return Landings(depth=falls.depth, east=falls.east, north=falls.north)
