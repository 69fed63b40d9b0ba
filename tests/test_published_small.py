"""Small published tables, refitted: parallaxes, and velocities against distances.

The tables are transcribed in ``published.py``.  Beside each number: "read",
"memory" or "computed", as explained there.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pandas as pd
import pytest
from published import BENEDICT_2007, FREEDMAN_2001, HUBBLE_1929, TRANSCRIBED

import ladderfit as lf
from ladderfit.ladder import Ladder
from ladderfit.posterior.joint import posterior
from ladderfit.result import Result
from ladderfit.sampling.run import draw


@pytest.mark.published
@pytest.mark.parametrize("name", TRANSCRIBED)
def test_transcription(name: str, published_tables: Path) -> None:
    original = pd.read_csv(published_tables / f"{name}.csv")
    if name == "nist_certified":
        original = original[original["quantity"] != "r_squared"].reset_index(drop=True)
    columns = list(TRANSCRIBED[name].columns)
    pd.testing.assert_frame_equal(TRANSCRIBED[name], original[columns], check_exact=True)


# Benedict et al. 2007: 10 Cepheids with parallaxes, W = I - 1.52 (V - I).

# The table gives no errors of V and I: mean magnitudes of stars this bright are good to
# about 0.01 mag, which is nothing beside parallaxes of 4 to 14 percent (0.09 to 0.30 mag).
BENEDICT_CHOICES: dict[str, Any] = {
    "title": "Benedict et al. 2007",
    "anchors": {
        "parallaxes": {
            "columns": {
                "star": "name",
                "period": "period_d",
                "parallax": "parallax_mas",
                "parallax_error": "e_parallax_mas",
            },
            "magnitude": {
                "wesenheit": {"band": "I", "colour": ["V", "I"], "ratio": 1.52},
                "bands": {"V": "V", "I": "I"},
                "errors": {"total": "e_W"},
            },
        }
    },
    "priors": {
        # Parallaxes of the Fine Guidance Sensors are tied to reference stars of known
        # distance: there is no offset to fit, and with ten stars no way to.
        "parallax_offset": {"fixed": 0.0},
        "slope": {"normal": [-3.3, 5.0]},
        "zero_point": {"normal": [-5.9, 5.0]},
    },
}
NO_SCATTER = {"priors.scatter": {"fixed": 0.0}}  # as in the computed lines

# Computed in linearised form, M = W + 5 log10(parallax) - 10, weights from the parallaxes
# alone: (slope, zero point at 10 d), with the errors of both.
UNCORRECTED = (-3.35, -5.887)
CORRECTED = (-3.37, -5.935)  # with the paper's Lutz-Kelker-Hanson corrections
PUBLISHED = (-3.34, -5.86)  # memory; with those corrections
ERRORS = (0.22, 0.057)


def benedict(changes: dict[str, Any]) -> Result:
    stars = BENEDICT_2007.assign(e_W=0.01)
    ladder = lf.build_ladder(BENEDICT_CHOICES, {"anchors.parallaxes": stars})
    return draw(ladder.change(changes), seed=1, draws=4000)


def line(result: Result) -> np.ndarray:
    """Means of slope and zero point."""
    return np.array([result.mean("slope"), result.mean("zero_point")])


def test_the_linearised_form_gives_the_computed_line() -> None:
    """Where the reference values come from, and that the index is built alike."""
    stars = BENEDICT_2007
    index = stars["I"] - 1.52 * (stars["V"] - stars["I"])
    absolute = index + 5.0 * np.log10(stars["parallax_mas"]) - 10.0
    error = 5.0 / np.log(10.0) * stars["e_parallax_mas"] / stars["parallax_mas"]
    found, covariance = np.polyfit(
        np.log10(stars["period_d"]) - 1.0, absolute, 1, w=1.0 / error, cov="unscaled"
    )
    np.testing.assert_allclose(found, UNCORRECTED, atol=0.002)
    np.testing.assert_allclose(np.sqrt(np.diag(covariance)), ERRORS, atol=0.001)


@pytest.mark.parametrize("changes", [NO_SCATTER, {}], ids=["no scatter", "free scatter"])
def test_benedict_2007(changes: dict[str, Any]) -> None:
    result = benedict(changes)
    assert result.parameters == ("slope", "zero_point", "scatter", "parallax_offset")
    difference = np.abs(line(result) - UNCORRECTED)
    assert np.all(difference < 0.5 * np.array(ERRORS)), difference
    assert np.all(np.abs(line(result) - PUBLISHED) < ERRORS)
    widths = np.array([result.sd("slope"), result.sd("zero_point")]) / ERRORS
    # A free scatter (0.08 +- 0.06 mag) can only add to the errors.
    low, high = (0.93, 1.10) if changes else (1.0, 1.35)
    assert np.all((widths > low) & (widths < high)), widths


def test_benedict_2007_uniform_in_volume() -> None:
    """The prior does what the Lutz-Kelker-Hanson corrections are for.

    With W known to 0.01 mag the prior 10^(0.6 mu) of each star, mu = W - M0 - b x,
    multiplies the posterior of the line by exp(-0.6 ln 10 (n M0 + b sum x)).  That
    shifts a Gaussian by its covariance times the gradient of the exponent.
    """
    volume = {**NO_SCATTER, "anchors.parallaxes.distance_prior": "uniform in volume"}
    flat, tilted = benedict(NO_SCATTER), benedict(volume)
    assert np.all(np.abs(line(tilted) - CORRECTED) < 0.5 * np.array(ERRORS))
    x = np.log10(BENEDICT_2007["period_d"]) - 1.0
    gradient = -0.6 * np.log(10.0) * np.array([x.sum(), len(x)])
    expected = np.cov(flat.draws["slope"], flat.draws["zero_point"]) @ gradient
    limit = 0.1 * np.array(ERRORS)  # 4 Monte Carlo errors, and what is not Gaussian
    assert expected[1] < -4.0 * limit[1]
    np.testing.assert_array_less(np.abs(line(tilted) - line(flat) - expected), limit)


# Hubble 1929 and Freedman et al. 2001: velocities against distances.


class Law(NamedTuple):
    """A table, its columns (name, distance, velocity), and whether the law has a constant."""

    table: pd.DataFrame
    columns: tuple[str, str, str]
    constant: bool

    def ladder(self, **priors: Any) -> Ladder:
        columns = dict(zip(("name", "distance", "velocity"), self.columns, strict=True))
        wide = {"hubble_constant": {"normal": [0.0, 1e5]}}
        if self.constant:
            wide["velocity_constant"] = {"normal": [0.0, 1e5]}
        choices = {
            "expansion": {"columns": columns, "velocity_constant": self.constant},
            "priors": {**wide, **priors},
        }
        return lf.build_ladder(choices, {"expansion": self.table})

    def arrays(self) -> tuple[np.ndarray, np.ndarray]:
        _, distance, velocity = self.columns
        return self.table[distance].to_numpy(float), self.table[velocity].to_numpy(float)


HUBBLE_COLUMNS = ("object", "r_Mpc", "v_kms")
HUBBLE = Law(HUBBLE_1929, HUBBLE_COLUMNS, constant=True)
HUBBLE_THROUGH_ORIGIN = Law(HUBBLE_1929, HUBBLE_COLUMNS, constant=False)
FREEDMAN = Law(FREEDMAN_2001, ("galaxy", "distance_Mpc", "velocity_kms"), constant=False)

LAWS = pytest.mark.parametrize(
    ("law", "expected"),
    [
        # Hubble 1929: slope and intercept (computed; well-known values).  His own solution,
        # with the motion of the Sun, is 465 +- 50 (read).
        (HUBBLE, [454.158, -40.784]),
        # Hubble 1929, through the origin (computed).
        (HUBBLE_THROUGH_ORIGIN, [423.937]),
        # Freedman et al. 2001, 24 galaxies, through the origin (read).
        (FREEDMAN, [76.581]),
    ],
    ids=["Hubble 1929", "Hubble 1929 through the origin", "Freedman 2001"],
)


def names(law: Law) -> list[str]:
    return ["hubble_constant", *(["velocity_constant"] if law.constant else [])]


@LAWS
def test_posterior_mean_of_the_velocity_law(law: Law, expected: list[float]) -> None:
    """Given the scatter the posterior is Gaussian, its mean the same at every scatter: exact."""
    joint = posterior(law.ladder())
    assert joint.split.theta == tuple(names(law))
    scatters = np.array([[30.0], [100.0], [250.0], [600.0]])
    means = joint.solution(scatters).mean
    np.testing.assert_allclose(means, np.tile(expected, (4, 1)), rtol=1e-3)


@LAWS
def test_draws_of_the_velocity_law(law: Law, expected: list[float]) -> None:
    result = draw(law.ladder(), seed=1, draws=20_000)
    assert result.parameters == (*names(law), "velocity_scatter")
    for name, value in zip(names(law), expected, strict=True):
        limit = 5.0 * result.sd(name) / np.sqrt(result.diagnostics.ess[name])
        assert result.mean(name) == pytest.approx(value, abs=limit)


def test_draws_through_the_origin_to_a_thousandth() -> None:
    # Freedman et al. 2001: 76.581 (read); 0.1 % is nearly 6 Monte Carlo errors here.
    result = draw(FREEDMAN.ladder(), seed=1, draws=100_000)
    assert result.mean("hubble_constant") == pytest.approx(76.581, rel=1e-3)


def test_freedman_error_at_its_own_scatter() -> None:
    # Freedman et al. 2001: 3.965 km/s/Mpc for a residual standard error of 258.9 (read).
    joint = posterior(FREEDMAN.ladder())
    factor = joint.solution(np.array([[258.9]])).factor
    assert 1.0 / factor[0, 0, 0] == pytest.approx(3.965, rel=1e-3)
    fixed = draw(FREEDMAN.ladder(velocity_scatter={"fixed": 258.9}), seed=1, draws=20_000)
    assert fixed.sd("hubble_constant") == pytest.approx(3.965, rel=0.025)  # 5 Monte Carlo errors


def test_most_probable_scatter_is_the_residual_standard_error() -> None:
    """Freedman et al. 2001: 258.9 km/s on 23 degrees of freedom (read).

    With a flat prior the scatter's density goes as s^-23 exp(-23 x 258.9^2 / 2 s^2):
    its mode is 258.9.
    """
    joint = posterior(FREEDMAN.ladder(velocity_scatter={"half_normal": 1e6}))
    scatter = np.linspace(200.0, 320.0, 24_001)
    mode = scatter[np.argmax(joint.log_density(scatter[:, None]))]
    assert mode == pytest.approx(258.9, rel=1e-3)


@LAWS
def test_free_scatter_widens_the_error(law: Law, expected: list[float]) -> None:
    """Errors of the posterior with the scatter free, against its one-dimensional integral.

    Least squares quotes sqrt(s^2 / sum d^2) at the estimated s.  The posterior averages
    s^2 over its density, s^-(n-k) exp(-RSS / 2 s^2 - s^2 / 2 half-normal^2), which is
    skewed: for Freedman's 24 galaxies the error is 4.22, not 3.965, 6 percent more.
    """
    del expected
    distance, velocity = law.arrays()
    design = np.column_stack([distance, np.ones(len(distance))][: 1 + law.constant])
    (rss,) = np.linalg.lstsq(design, velocity)[1]
    ladder = law.ladder()
    s = np.linspace(20.0, 2000.0, 40_000)
    log_density = -(len(velocity) - design.shape[1]) * np.log(s) - rss / (2.0 * s**2)
    log_density += ladder.choices.prior("velocity_scatter").log_density(s)
    weight = np.exp(log_density - log_density.max())
    weight /= weight.sum()
    variance = (weight @ s**2) * np.diag(np.linalg.inv(design.T @ design))
    result = draw(ladder, seed=1, draws=20_000)
    for name, value in zip(names(law), np.sqrt(variance), strict=True):
        assert result.sd(name) == pytest.approx(value, rel=0.03)
    assert result.mean("velocity_scatter") == pytest.approx(weight @ s, rel=0.01)
    if law is FREEDMAN:
        assert np.sqrt(variance[0]) / 3.965 == pytest.approx(1.063, abs=0.005)
