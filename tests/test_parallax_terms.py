"""The parallax stars' density, every choice of it, against integrals written out."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pandas as pd
import pytest
from oracle_detection import SUN, log_prior
from scipy.special import ndtr

import ladderfit as lf
from ladderfit.errors import InputError
from ladderfit.physics.sky import separations
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.posterior.offsets import shared_errors

CHOICES: dict[str, Any] = {
    "anchors": {
        "parallaxes": {
            "columns": {
                "star": "ID",
                "period": "P",
                "parallax": "plx",
                "parallax_error": "e_plx",
            },
            "magnitude": {
                "band": "W",
                "bands": {"W": "W", "V": "V"},
                "errors": {"W": "e_W"},
            },
        }
    },
    "groups": {"bright": {"system": "one", "parallax_stars": True}},
}
SECTION = "anchors.parallaxes"
POINT = {
    "zero_point": -5.83,
    "slope": -3.1,
    "scatter": 0.12,
    "parallax_offset": 0.02,
    "parallax_offset[bright]": -0.03,
    "parallax_offset_slope": 0.004,
    "parallax_error_scale": 1.3,
    "distance_length": 1.4,
}
PER_MAG = 0.2 * np.log(10.0)


def table(n: int = 14, seed: int = 2) -> pd.DataFrame:
    rng = np.random.default_rng(seed)
    log_period = rng.uniform(0.6, 1.6, n)
    distance = rng.uniform(0.4, 4.0, n)
    index = -5.9 - 3.3 * (log_period - 1.0) + 10.0 + 5.0 * np.log10(distance)
    index = index + rng.normal(0.0, 0.1, n)
    return pd.DataFrame(
        {
            "ID": [f"S{i:02d}" for i in range(n)],
            "P": 10.0**log_period,
            "W": index,
            "e_W": rng.uniform(0.02, 0.06, n),
            "V": index + rng.uniform(1.5, 3.0, n),
            "plx": 1.0 / distance + rng.normal(0.0, 0.05, n),
            "e_plx": rng.uniform(0.03, 0.1, n),
            "G": rng.uniform(6.0, 11.0, n),
            "glon": rng.uniform(0.0, 360.0, n),
            "glat": rng.normal(0.0, 4.0, n),
            "group": np.where(rng.uniform(size=n) < 0.4, "one", "two"),
            "cl": ["", "A", "A", "B", "", "A", "", "B", *[""] * (n - 8)],
            "A_V": rng.uniform(0.2, 2.0, n),
        }
    )


def ladder(stars: pd.DataFrame, section: dict[str, Any], **others: Any) -> lf.Ladder:
    plain = copy.deepcopy(CHOICES) | others
    more = dict(section)
    plain["anchors"]["parallaxes"]["columns"] |= more.pop("columns", {})
    plain["anchors"]["parallaxes"] |= more
    if "system" not in plain["anchors"]["parallaxes"]["columns"]:
        plain.pop("groups")
    return lf.build_ladder(plain, {SECTION: stars})


def density_at(joint: Posterior, values: dict[str, float]) -> np.ndarray:
    """Log density of each star or cluster, where phi has these values."""
    point = joint.coordinates(values | dict.fromkeys(joint.split.phi_names, 0.0) | values)
    return joint.log_parallaxes(point[None, :])[0]


def written_out(
    stars: pd.DataFrame,
    members: list[int],
    prior: Any,
    *,
    offset: np.ndarray,
    scale: float = 1.0,
    extra: tuple[float, float] | None = None,
    limit: float | None = None,
    softness: float = 0.0,
    parallax_min: float | None = None,
    grid: tuple[float, float] = (-15.0, 40.0),
) -> float:
    """Log of L over D for stars of one modulus, both on a dense grid."""
    mu = np.linspace(*grid, 1_100_001)
    plx, log_p = 10.0 ** (2.0 - 0.2 * mu), prior(mu)
    top, bottom = log_p.copy(), log_p.copy()
    for i in members:
        star = stars.iloc[i]
        absolute = POINT["zero_point"] + POINT["slope"] * (np.log10(star["P"]) - 1.0)
        var = star["e_W"] ** 2 + POINT["scatter"] ** 2
        err = scale * star["e_plx"]
        top += -0.5 * (star["W"] - absolute - mu) ** 2 / var - 0.5 * np.log(2 * np.pi * var)
        top += -0.5 * ((star["plx"] - plx - offset[i]) / err) ** 2
        top -= np.log(err) + 0.5 * np.log(2 * np.pi)
        with np.errstate(divide="ignore"):
            if limit is not None:
                edge = star["W"] + limit - star["V"] - absolute
                bottom += np.log(ndtr((edge - mu) / np.sqrt(var + softness**2)))
            if parallax_min is not None:
                bottom += np.log(ndtr((plx + offset[i] - parallax_min) / err))
    if extra is not None:
        value, err = extra
        top += -0.5 * ((value - plx) / err) ** 2 - np.log(err) - 0.5 * np.log(2 * np.pi)
    return log_integral(top, mu) - log_integral(bottom, mu)


def log_integral(values: np.ndarray, mu: np.ndarray) -> float:
    peak = values.max()
    return float(peak + np.log(np.trapezoid(np.exp(values - peak), mu)))


DISC = {"length": 2.6, "height": 0.12}
PRIORS: dict[str, dict[str, Any]] = {
    "flat": {"modulus_bounds": [4.0, 20.0]},
    "volume": {"distance_prior": "uniform in volume"},
    "exponential": {"distance_prior": {"exponential": 1.4}},
    "disc": {"distance_prior": {"disc": DISC}, "columns": {"l": "glon", "b": "glat"}},
}
SELECTIONS: dict[str, dict[str, Any]] = {
    "none": {},
    "magnitude": {"limit": 9.0, "softness": 0.1},
    "both": {"limit": 9.0, "parallax_min": 0.15},
    "parallax": {"parallax_min": 0.15},
}


def prior_of(kind: str, star: pd.Series) -> Any:
    if kind == "flat":
        return np.zeros_like
    if kind == "exponential":
        return log_prior(kind, 1.4)
    return log_prior(kind, sky=(star["glon"], star["glat"]), disc={**DISC, **SUN})


# A prior uniform in volume has no norm but with a magnitude limit.
BOTH = [
    (kind, selection)
    for kind in PRIORS
    for selection in SELECTIONS
    if not (kind == "volume" and selection in ("none", "parallax"))
]


@pytest.mark.parametrize(("kind", "selection"), BOTH)
def test_every_prior_and_selection(kind: str, selection: str) -> None:
    """Quadrature and chance of detection to 1e-6, with an error scale and a free length."""
    limits = SELECTIONS[selection]
    stars = table()
    section = dict(PRIORS[kind])
    if limits:
        section["selection"] = limits | ({"band": "V"} if "limit" in limits else {})
    priors = {"parallax_error_scale": {"log_normal": [1.0, 0.3]}}
    if kind == "exponential":
        priors["distance_length"] = {"log_normal": [1.0, 1.0]}
    built = ladder(stars, section, priors=priors)
    kept = [int(row) - 1 for row in built.parallax_stars.row]
    found = density_at(posterior(built), POINT)
    offset = np.full(len(stars), POINT["parallax_offset"])
    grid = (4.0, 20.0) if kind == "flat" else (-15.0, 40.0)
    for value, i in list(zip(found, kept, strict=True))[:6]:
        expected = written_out(
            stars,
            [i],
            prior_of(kind, stars.iloc[i]),
            offset=offset,
            scale=1.3,
            grid=grid,
            **limits,
        )
        assert value == pytest.approx(expected, abs=2e-6), i


@pytest.mark.parametrize("limits", [{}, {"limit": 10.5}, {"limit": 10.5, "parallax_min": 0.1}])
def test_clusters_share_a_modulus(limits: dict[str, float]) -> None:
    """One prior factor for a cluster; a cluster's own parallax, with the offset or without."""
    stars = table()
    stars["V"] = stars["W"] + 1.5
    stars.loc[[1, 2, 5, 3, 7], "plx"] = [0.5, 0.55, 0.45, 1.2, 1.25]
    section: dict[str, Any] = {
        "columns": {"cluster": "cl"},
        "distance_prior": {"exponential": 1.4},
        "clusters": {
            "A": {"parallax": 0.52, "error": 0.03},
            "B": {"parallax": 1.3, "error": 0.02, "offset": True},
        },
    }
    if limits:
        section["selection"] = limits | {"band": "V"}
    joint = posterior(ladder(stars, section))
    found = density_at(joint, POINT)
    prior, offset = log_prior("exponential", 1.4), np.full(len(stars), 0.02)
    kept = [int(row) - 1 for row in joint.ladder.parallax_stars.row]
    groups = {
        "A": [i for i in (1, 2, 5) if i in kept],
        "B": [i for i in (3, 7) if i in kept],
    }
    own = {"A": (0.52, 0.03), "B": (1.3 - 0.02, 0.02)}
    expected = {
        name: written_out(stars, members, prior, offset=offset, extra=own[name], **limits)
        for name, members in groups.items()
        if members
    }
    names = joint.ladder.parallax_stars.extras.clusters
    assert len(found) == len(kept) - sum(len(groups[name]) - 1 for name in names)
    for place, name in enumerate(names):
        assert found[place] == pytest.approx(expected[name], abs=2e-6)
    alone = next(i for i in kept if stars["cl"][i] == "")
    assert found[len(names)] == pytest.approx(
        written_out(stars, [alone], prior, offset=offset, **limits), abs=2e-6
    )


def test_offsets_of_groups_and_with_magnitude() -> None:
    stars = table()
    section = {
        "columns": {"g_magnitude": "G", "system": "group"},
        "offsets": ["bright"],
        "offset_slope": True,
        "distance_prior": {"exponential": 1.4},
    }
    joint = posterior(ladder(stars, section))
    names = {name for name in joint.split.phi_names if name.startswith("parallax")}
    assert names == {"parallax_offset", "parallax_offset[bright]", "parallax_offset_slope"}
    bright = stars["group"].to_numpy() == "one"
    offset = np.where(bright, -0.03, 0.02) + 0.004 * (stars["G"].to_numpy() - 10.0)
    found = density_at(joint, POINT)
    for i in range(6):
        expected = written_out(stars, [i], log_prior("exponential", 1.4), offset=offset)
        assert found[i] == pytest.approx(expected, abs=2e-6)


def test_shared_errors_keep_their_covariance() -> None:
    """Modes and what is left give back the variances exactly, and nearly all covariance."""
    stars = table(60)
    section = {
        "columns": {"l": "glon", "b": "glat"},
        "correlation": {"amplitude": 0.01, "length": 20.0},
        "distance_prior": {"exponential": 1.4},
    }
    built = ladder(stars, section)
    modes, left = shared_errors(built.choices.anchors.parallaxes, built.parallax_stars)
    covariance = modes.T @ modes + np.diag(left)
    exact = 0.01**2 * np.exp(-separations(stars["glon"], stars["glat"]) / 20.0)
    np.testing.assert_allclose(np.diag(covariance), 0.01**2, rtol=1e-12)
    assert left.sum() <= 0.01 * 60 * 0.01**2 * (1.0 + 1e-9)
    assert np.abs(covariance - exact).max() < 0.05 * 0.01**2
    joint = posterior(built)
    fields = [name for name in joint.split.phi_names if name.startswith("parallax_field")]
    assert len(fields) == len(modes)
    values = POINT | {"parallax_field[1]": 1.5, "parallax_field[2]": -0.7}
    found = density_at(joint, values)
    offset = 0.02 + 1.5 * modes[0] - 0.7 * modes[1]
    wider = stars.assign(e_plx=np.sqrt(stars["e_plx"] ** 2 + left))
    for i in range(3):
        expected = written_out(wider, [i], log_prior("exponential", 1.4), offset=offset)
        assert found[i] == pytest.approx(expected, abs=2e-6)


def test_an_uninformative_star_leaves_the_posterior() -> None:
    """Under a volume prior and a magnitude limit: the strongest single test of D.

    A star without a usable parallax tells nothing of the relation: its integral and
    its chance of detection grow alike with brightness.  Without D it pulls.
    """
    stars = table()
    lost = stars.iloc[:1].assign(ID="lost", e_plx=1e4, plx=37.0)
    both = pd.concat([stars, lost], ignore_index=True)
    section = {
        "distance_prior": "uniform in volume",
        "selection": {"band": "V", "limit": 30.0, "softness": 0.2},
    }
    joint = posterior(ladder(both, section))
    plain = posterior(ladder(both, {"distance_prior": "uniform in volume"}))
    rng = np.random.default_rng(1)
    z = joint.coordinates(POINT) + rng.normal(0.0, 0.2, (50, joint.dimension))
    change = joint.log_parallaxes(z)[:, -1]
    np.testing.assert_allclose(change, change[0], atol=2e-6)
    assert np.ptp(plain.log_parallaxes(z)[:, -1]) > 0.5  # negative control


def test_one_star_in_a_cluster_is_a_star() -> None:
    stars = table()
    alone = stars.assign(cl=[f"C{i}" for i in range(len(stars))])
    section = {"distance_prior": {"exponential": 1.4}, "selection": {"band": "V", "limit": 12.0}}
    single = posterior(ladder(alone, section | {"columns": {"cluster": "cl"}}))
    plain = posterior(ladder(alone, section))
    np.testing.assert_allclose(density_at(single, POINT), density_at(plain, POINT), atol=1e-6)


REFUSED = {
    "flat without bounds": (
        {"selection": {"band": "V", "limit": 9.0}},
        "a selection under a prior flat in modulus without bounds",
    ),
    "parallax alone in a volume": (
        {"distance_prior": "uniform in volume", "selection": {"parallax_min": 0.1}},
        "a limit in parallax alone under a prior uniform in volume",
    ),
    "limit without a band": (
        {"distance_prior": {"exponential": 1.0}, "selection": {"limit": 9.0}},
        "a limit without a band",
    ),
    "no limit": ({"distance_prior": {"exponential": 1.0}, "selection": {}}, "no limit"),
    "two densities": (
        {"distance_prior": {"exponential": 1.0, "disc": DISC}},
        "two densities",
    ),
    "disc without a sky": ({"distance_prior": {"disc": DISC}}, "positions on the sky, without"),
    "slope without G": ({"offset_slope": True}, "an offset linear in G, without columns"),
    "cluster without a column": (
        {"clusters": {"A": {"parallax": 1.0, "error": 0.1}}},
        "clusters, without columns for it",
    ),
    "extinction without a column": (
        {"extinction_max": 1.0},
        "a cut in extinction, without columns",
    ),
    "bounds elsewhere": (
        {"distance_prior": "uniform in volume", "modulus_bounds": [5.0, 15.0]},
        "bounds of the modulus under another distance prior",
    ),
    "an unknown group": ({"offsets": ["faint"]}, "the group 'faint', which [groups] does not"),
    "an unknown band": (
        {"distance_prior": {"exponential": 1.0}, "selection": {"band": "K", "limit": 9.0}},
        "K",
    ),
}


@pytest.mark.parametrize(("section", "words"), REFUSED.values(), ids=REFUSED)
def test_refusals(section: dict[str, Any], words: str) -> None:
    with pytest.raises(InputError) as caught:
        ladder(table(), section)
    assert words in str(caught.value)
    assert len(str(caught.value).splitlines()) == 1


@pytest.mark.parametrize("name", ["distance_length", "parallax_error_scale"])
def test_scales_are_above_zero(name: str) -> None:
    for prior in ({"normal": [1.0, 0.1]}, {"fixed": 0.0}, {"uniform": [-1.0, 2.0]}):
        with pytest.raises(InputError, match="above 0"):
            ladder(table(), {}, priors={name: prior})


def test_limits_leave_stars_out() -> None:
    stars = table()
    section = {
        "distance_prior": {"exponential": 1.4},
        "columns": {"extinction": "A_V"},
        "extinction_max": 1.5,
        "selection": {"band": "V", "limit": 9.0, "parallax_min": 0.3},
        "min_signal": 5.0,
    }
    built = ladder(stars, section)
    kept = stars[
        (stars["V"] <= 9.0)
        & (stars["plx"] >= 0.3)
        & (stars["A_V"] <= 1.5)
        & (stars["plx"] >= 5.0 * stars["e_plx"])
    ]
    assert list(built.parallax_stars.star) == list(kept["ID"])
    reasons = built.kept[SECTION].reasons
    assert set(reasons) >= {"above the extinction limit", "beyond the magnitude limit"}
    (note,) = (note for note in built.notes if "warning" in note)
    assert "5 errors of the measured parallax is not accounted for" in note
    soft = ladder(stars, section | {"selection": {"band": "V", "limit": 9.0, "softness": 0.2}})
    assert "beyond the magnitude limit" not in soft.kept[SECTION].reasons


def test_the_default_treatment_is_unchanged_by_spare_columns() -> None:
    """Columns that no choice needs are not read, so that a gap in them costs no star."""
    stars = table()
    stars.loc[3, ["G", "glon"]] = np.nan
    columns = {"g_magnitude": "G", "l": "glon", "b": "glat"}
    assert len(ladder(stars, {"columns": columns}).parallax_stars) == len(stars)
    with_slope = ladder(stars, {"columns": columns, "offset_slope": True})
    assert len(with_slope.parallax_stars) == len(stars) - 1
