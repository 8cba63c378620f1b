"""Winch and probe on links of their own, each with a clock of its own: the guide is found all the same."""

import numpy as np

from eastfall.io.arrivals import LineBlock
from eastfall.io.pipeline import Pipeline
from eastfall.io.sitefile import parse_site

SITE = """
[site]
name = "Gannet Sump"
latitude_deg = 57.3
gravity_mps2 = 9.8167
[shaft]
depth_m = 120.0
[run]
kind = "guided"
[[link]]
url = "winch"
columns = ["time_s", "depth_m"]
latency_s = 0.2
[[link]]
url = "probe"
columns = ["time_s", "tilt_a_deg", "tilt_b_deg"]
"""
LEAN = np.array([2e-4, -1e-4])  # east, north [m/m]
SPEED, NOISE = 1.5, 0.002  # [m/s], [deg]


def block(link, host, rows):
    """Give lines of a link that arrive at host times."""
    data = b"".join((",".join(f"{value:.5f}" for value in row) + "\n").encode() for row in rows)
    return LineBlock(data=data, times=np.round(host, 6), first_line=1, link=link)


def test_clocks_an_hour_apart_and_a_late_winch_leave_residuals_within_three_u():
    """Winch 5 a second, 0.2 s late, on a clock an hour ahead; probe 20 a second on its own: the lean within 3u.

    The tilts hold the textbook lean of the moving line, 2ωv cos φ/g to the west going down (GRS80 ω).
    """
    rng = np.random.default_rng(12)
    winch, probe = np.arange(0.0, 80.0, 0.2), np.arange(0.0, 79.0, 0.05)
    felt = 2.0 * 7.292115e-5 * SPEED * np.cos(np.radians(57.3)) / 9.8167
    tilt = np.degrees([LEAN[1], LEAN[0] - felt])[:, None] + rng.normal(0.0, NOISE, (2, probe.size))
    pipeline = Pipeline(parse_site(SITE, "two.toml"))
    for begin in range(0, 80, 4):
        late, now = (winch >= begin) & (winch < begin + 4), (probe >= begin) & (probe < begin + 4)
        depth = np.round(SPEED * winch[late], 2)
        pipeline.take(block(0, winch[late] + 0.2, zip(winch[late] + 3600.0, depth, strict=True)))
        pipeline.take(block(1, probe[now], zip(probe[now] + 17.0, *tilt[:, now], strict=True)))
    pipeline.close(81.0)
    stations = pipeline.survey.result().stations
    assert [one.depth for one in stations][:12] == [10.0 * n for n in range(12)]
    for one in stations[1:]:
        assert abs(one.residual_east - LEAN[0] * one.depth) <= 3.0 * one.u_east
        assert abs(one.residual_north - LEAN[1] * one.depth) <= 3.0 * one.u_north
