"""The formulas that a report rests on, each with where it is published; data, nothing is reckoned here."""

from typing import NamedTuple

from eastfall.physics.settings import Kind


class Formula(NamedTuple):
    """One formula as a reader can check it."""

    what: str
    formula: str
    source: str


_EARTH = (
    Formula(
        "Normal gravity on the ellipsoid",
        "γ = γₑ (1 + k sin²φ) / √(1 − e² sin²φ)",
        "Somigliana's closed form with the constants of WGS 84; Moritz, H. (1980), Geodetic Reference System 1980, "
        "Bulletin géodésique 54(3); NGA.STND.0036 (2014) (number from memory, unconfirmed)",
    ),
    Formula(
        "Gravity below the collar",
        "dg/dz = F − 4πGρ(z)",
        "Poincaré and Prey; Hofmann-Wellenhof, B. & Moritz, H. (2006), Physical Geodesy, eq. 3-46",
    ),
    Formula(
        "Curvature of the plumb line",
        "field line: ½ κ z² toward the pole, κ = (1/γ)(1/M)(dγ/dφ) along the level surface",
        "Heiskanen, W. A. & Moritz, H. (1967), Physical Geodesy, chapter 5 (from memory, unconfirmed)",
    ),
)
_GUIDED = (
    Formula(
        "Offset from tilt over one interval of depth Δs, A toward azimuth α",
        "ΔN = Δs (sin a cos α − sin b sin α),  ΔE = Δs (sin a sin α + sin b cos α)",
        "geometry; a and b are the corrected tilts of the axes A and B",
    ),
    Formula(
        "Lean of the felt vertical on a line moving at speed v, down positive",
        "ε = 2 ω v cos φ / g, toward the east going down",
        "Coriolis acceleration; Kibble, T. W. B. & Berkshire, F. H. (2004), Classical Mechanics, chapter 5",
    ),
)
_HUNG = (
    Formula(
        "Side balance of a hanging line under tension T(z)",
        "(T x′)′ = −λ g κ z − f(z),  T x′ = M′ g κ L + bob drag at the end",
        "statics of a heavy string in the curved field; light wire κL², bare wire ¾ κL² as limits",
    ),
    Formula(
        "Swing of the bob on the turning Earth",
        "ζ(t) = c + exp(−γt) exp(−iω t sin φ) (A exp(iω₀t) + B exp(−iω₀t)),  ζ = E + iN, c the rest point",
        "damped Foucault pendulum; Kibble & Berkshire (2004), chapter 5; fitted by separable least squares, "
        "Golub, G. H. & Pereyra, V. (1973), SIAM J. Numer. Anal. 10(2) (from memory, unconfirmed)",
    ),
)
_DROP = (
    Formula(
        "Motion of the falling body about the straight vertical",
        "r̈ = g(0) + W r − 2 ω × ṙ − drag(ṙ − air)",
        "integrated in full; first order, as a check: E = ⅓ ω cos φ √(8h³/g), Kibble & Berkshire (2004), chapter 5",
    ),
    Formula(
        "Drag of a smooth sphere",
        "C_d(Re) through the drag crisis",
        "Morrison, F. A. (2013), An Introduction to Fluid Mechanics (section from memory, unconfirmed: 8.2)",
    ),
)
_JUDGING = (
    Formula(
        "Combined and expanded uncertainty",
        "u² = Σ (∂y/∂xᵢ)² u²(xᵢ),  U = 2u",
        "JCGM 100:2008 (GUM), eq. 10 and 6.3",
    ),
    Formula(
        "Standard uncertainty of the length r of the horizontal residual (e, n)",
        "u² = (e² u_e² + n² u_n² + 2 e n u_en)/r²",
        "JCGM 100:2008 (GUM), eq. 13",
    ),
    Formula(
        "Verdict on the length r of the horizontal residual against the action limit T",
        "r + U ≤ T: within;  r − U > T: over;  else undecided",
        "JCGM 106:2012, 8.3; ISO 14253-1:2017",
    ),
    Formula(
        "Alarms", "delays, dead band, acknowledgement and shelving by a table of states", "IEC 62682:2022"
    ),
    Formula(
        "Seals of the run log",
        "SHA-256 over the seal before and all bytes since",
        "NIST FIPS 180-4 (2015)",
    ),
)
_OF_KIND: dict[Kind, tuple[Formula, ...]] = {"guided": _GUIDED, "hung": _HUNG, "drop": _DROP}


def formulas(kind: Kind) -> tuple[Formula, ...]:
    """Return what a run of a kind rests on, in the order in which it is used."""
    return (*_EARTH, *_OF_KIND[kind], *_JUDGING)
