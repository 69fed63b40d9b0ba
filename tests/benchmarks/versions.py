"""The same numbers from other versions of Python and of the libraries.

    python tests/benchmarks/versions.py write FILE
    python tests/benchmarks/versions.py compare FILE OTHER

The first prints versions and writes numbers as JSON; the second says how far two such
files lie apart and ends with 1 where a number that no random draw enters differs by more
than 1e-9.  Differences are relative to the number, or to a thousandth of the largest of
its array where the number is smaller; those of logarithms of densities of single objects
are taken as they are, which is relative to the density.  Where a mode is found, the search
ends within 0.02 widths of the top, and says its width from differences of densities:
places and widths may differ by 1e-3 widths.  All data are those of the shipped samples.
"""

from __future__ import annotations

import json
import platform
import sys
import tempfile
from collections.abc import Callable, Mapping
from dataclasses import replace
from functools import partial
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np

import ladderfit as lf
from ladderfit.classical import (
    line_design,
    line_with_both_errors,
    line_with_outliers,
    lutz_kelker,
    weighted_least_squares,
)
from ladderfit.influence.given import Given
from ladderfit.influence.objects import Objects
from ladderfit.influence.sets import CEPHEID, FLOW, HOST, PEAK, STAR
from ladderfit.ladder import Ladder
from ladderfit.posterior.joint import Posterior, posterior
from ladderfit.sampling.mode import find_modes_from
from ladderfit.sampling.run import target
from ladderfit.sensitivity.error_budget import error_budget
from ladderfit.shipped import sample_ladder

TOLERANCE = 1e-9
LIBRARIES = ("numpy", "scipy", "pandas", "astropy", "numba", "pyarrow", "h5py", "xarray")
DRAWN = "seeded draws"
LOGARITHMS = "downdates, densities"
PLACES, WIDTHS = "modes, places", "modes, widths"
ALLOWED = {PLACES: 1e-3, WIDTHS: 1e-3, DRAWN: float("inf")}
VALUES = {  # where log densities are taken, by name of parameter
    "zero_point": -5.91,
    "slope": -3.29,
    "metallicity": -0.22,
    "scatter": 0.07,
    "parallax_offset": -0.005,
    "peak_magnitude": -19.25,
    "peak_scatter": 0.11,
    "expansion_scatter": 0.12,
    "alpha": 0.14,
    "beta": 3.0,
    "width_spread": 1.0,
    "colour_spread": 0.1,
    "outlier_fraction": 0.06,
    "outlier_width": 0.6,
    "outlier_offset": -0.1,
    "degrees_of_freedom": 5.0,
    "intrinsic_colour_slope": 0.2,
    "intrinsic_colour_scatter": 0.08,
    "intrinsic_colour_term": 0.3,
    "reddening_ratio": 0.39,
    "reddening_spread": 0.15,
    "parallax_colour": 0.9,
    "parallax_reddening_spread": 0.2,
    "distance_length": 1.5,
    "parallax_error_scale": 1.1,
}
Numbers = dict[str, dict[str, list[float]]]


def ladders(folder: Path) -> dict[str, Ladder]:
    """Ladders of every kind of term; matrices of covariances are written to the folder."""
    sample = lf.read_ladder(sample_ladder())
    tripp = lf.read_ladder(Path(sample_ladder()).with_name("tripp.toml"))
    near, far = (
        len(sample.table(key).columns["SN"].missing) for key in ("supernovae", "expansion")
    )
    files = {}
    for size in (far, near + far):
        place = np.arange(size)
        matrix = 0.02**2 * np.exp(-np.abs(place[:, None] - place) / 10.0)
        files[size] = {"file": str(folder / f"{size}.npy"), "adds": True}
        np.save(folder / f"{size}.npy", matrix)
    outliers = "cepheids.outliers.treatment"
    mixture = {outliers: "mixture", "priors.outlier_offset": {"normal": [0.0, 1.0]}}
    colours = ("in the variance", "one population", "intrinsic relation")
    parallaxes = {
        "anchors.parallaxes.distance_prior": {"exponential": 1.4},
        "priors.parallax_error_scale": {"log_normal": [1.1, 0.3]},
    }
    return {
        "sample": sample,
        "sample, scatters apart": sample.change({"supernovae.scatter": "apart"}),
        "peak terms": tripp,
        "peak terms, in the variance": tripp.change({"peak_relation.errors": "in the variance"}),
        "outliers, mixture": sample.change(mixture),
        "outliers, Student-t": sample.change({outliers: "Student-t"}),
        **{
            f"free ratio, {how}": sample.change({"relation.reddening": {"colours": how}})
            for how in colours
        },
        "covariance of the expansion": sample.change({"expansion.covariance": files[far]}),
        "covariance of all supernovae": sample.change({"supernovae.covariance": files[near + far]}),
        "other parallax terms": sample.change(parallaxes),
    }


def places(joint: Posterior, count: int = 6) -> np.ndarray:
    """Coordinates of phi about `VALUES`, shape (count, d), without a random number."""
    names = joint.split.phi_names
    middle = joint.coordinates({name: VALUES[name.split("[", 1)[0]] for name in names})
    step = 0.02 * np.maximum(np.abs(middle), 0.1)
    return middle + step * np.sin(np.arange(count)[:, None] * (1.0 + np.arange(len(names))))


def of_posteriors(found: Mapping[str, Ladder]) -> Numbers:
    """Log densities, parallax integrals, and means of what is integrated out."""
    numbers: Numbers = {"log densities": {}, "parallax integrals": {}, "means given phi": {}}
    for name, ladder in found.items():
        joint = posterior(ladder)
        z = places(joint)
        numbers["log densities"][name] = flat(joint.log_density(z))
        if joint.parallaxes is not None:
            stars = joint.parallaxes.log_density(partial(joint.split.value, z=z))
            numbers["parallax integrals"][name] = flat(stars)
        if joint.robust is None:
            numbers["means given phi"][name] = flat(joint.solution(z).coefficients)
    return numbers


def of_modes(found: Mapping[str, Ladder]) -> Numbers:
    """The climb from the start: height, place, and width in every coordinate."""
    heights, points, widths = {}, {}, {}
    for name, ladder in found.items():
        aim = target(posterior(ladder))
        (mode,) = find_modes_from(aim.log_density, aim.start[None], 0.3 * aim.scale)
        width = np.sqrt(np.diag(mode.covariance))
        heights[name] = [mode.log_density]
        points[name] = flat(mode.point)
        widths[name] = flat(width)
    return {"modes, heights": heights, PLACES: points, WIDTHS: widths}


def of_downdates(found: Mapping[str, Ladder]) -> Numbers:
    """Objects left out at given phi."""
    densities, means = {}, {}
    for name in ("sample", "peak terms", "outliers, mixture", "covariance of all supernovae"):
        joint = posterior(found[name])
        objects = Objects(Given(joint, places(joint, 3)))
        for kind in (HOST, CEPHEID, STAR, PEAK, FLOW):
            taken = [batch.taken for batch in objects.batches(kind)]
            label = f"{name}: {kind}"
            densities[label] = flat([each.log_predictive for each in taken])
            means[label] = flat([each.expected["hubble_constant"] for each in taken])
    return {LOGARITHMS: densities, "downdates, H0": means}


def of_budgets(found: Mapping[str, Ladder]) -> Numbers:
    """Error budgets of draws that are made up: cosines in place of random numbers."""
    numbers = {}
    for name in ("sample", "peak terms"):
        result = lf.draw(found[name], seed=1, draws=100)
        time = np.arange(400.0)
        made = {
            key: round(result.mean(key), 2)
            + 0.02 * np.cos(time * (0.1 + 0.37 * np.sqrt(place + 1)))
            for place, key in enumerate(result.draws)
        }
        budget = error_budget(replace(result, draws=made))
        for column in budget:
            numbers[f"{name}: {column}"] = flat(budget[column])
    return {"error budget": numbers}


def of_classical(sample: Ladder) -> Numbers:
    """Least squares and the estimates of older papers."""
    stars, near = sample.cepheids, sample.parallax_stars
    if stars is None or near is None:
        raise TypeError("the sample has Cepheids and parallax stars")
    host = stars.host == 0
    x, y, error = stars.log_period[host] - 1.0, stars.magnitude[host], np.sqrt(stars.variance[host])
    line = weighted_least_squares(line_design(x), y, error)
    both = line_with_both_errors(x, y, np.full_like(x, 0.02), error)
    robust = line_with_outliers(x, y, error)
    squares = {
        "values": flat(line.values),
        "covariance": flat(line.covariance),
        "residuals": flat(line.residuals),
        "sum of squares": [line.sum_of_squares],
    }
    lines = {
        "both errors": [both.slope, both.intercept],
        "outliers": [robust.slope, robust.intercept],
        "Lutz-Kelker": flat(lutz_kelker(0.01 * np.arange(1.0, 15.0))),
    }
    return {"least squares": squares, "other estimates": lines}


def drawn(found: Mapping[str, Ladder]) -> Numbers:
    """Means and standard deviations of draws from a seed."""
    numbers = {}
    for name, ladder in found.items():
        result = lf.draw(ladder, seed=1, draws=1000)
        for word, of in (("mean", result.mean), ("sd", result.sd)):
            numbers[f"{name}: {word}"] = [of(each) for each in result.headline]
    return {DRAWN: numbers}


def flat(values: Any) -> list[float]:
    """Numbers as a plain list."""
    if isinstance(values, list):
        return [number for each in values for number in flat(each)]
    return [float(number) for number in np.asarray(values, float).ravel()]


def apart(one: list[float], other: list[float], size: list[float] | None = None) -> float:
    """The largest difference of two lists, relative to a size; infinite where one lacks a number.

    By default the numbers are their own size.
    """
    a, b = np.array(one), np.array(other)
    if a.shape != b.shape:
        return float("inf")
    good = np.isfinite(a) & np.isfinite(b)
    if not np.array_equal(a[~good], b[~good], equal_nan=True):
        return float("inf")
    if size is None:
        own = np.maximum(np.abs(a), np.abs(b))[good]
        scale = np.maximum(own, 1e-3 * own.max(initial=0.0))
    else:
        scale = np.array(size)[good]
    off = np.abs(a[good] - b[good])
    return float(np.divide(off, scale, out=np.zeros_like(off), where=off > 0.0).max(initial=0.0))


def write(path: Path) -> None:
    """Compute everything."""
    versions = {"python": platform.python_version()}
    versions |= {name: metadata.version(name) for name in LIBRARIES}
    print(", ".join(f"{name} {version}" for name, version in versions.items()))
    with tempfile.TemporaryDirectory() as folder:
        found = ladders(Path(folder))
        parts: list[Callable[[], Numbers]] = [
            partial(of_posteriors, found),
            partial(of_modes, found),
            partial(of_downdates, found),
            partial(of_budgets, found),
            partial(of_classical, found["sample"]),
            partial(drawn, found),
        ]
        numbers = {kind: values for part in parts for kind, values in part().items()}
    path.write_text(json.dumps({"versions": versions, "numbers": numbers}), encoding="utf-8")


def compare(one: Path, other: Path) -> int:
    """One line for each kind of number; 1 where one that is not drawn is too far off."""
    first, second = (
        json.loads(path.read_text(encoding="utf-8"))["numbers"] for path in (one, other)
    )
    if {k: set(v) for k, v in first.items()} != {k: set(v) for k, v in second.items()}:
        print("the files are of other numbers")
        return 1
    failed = False
    for kind, values in first.items():
        off = {}
        for name, numbers in values.items():
            sizes = {PLACES: first[WIDTHS].get(name), LOGARITHMS: [1.0] * len(numbers)}
            off[name] = apart(numbers, second[kind][name], sizes.get(kind))
        worst = max(off, key=off.__getitem__)
        count = sum(map(len, values.values()))
        print(f"{kind:24}{count:8,} numbers   largest difference {off[worst]:.1e}   {worst}")
        failed |= not off[worst] <= ALLOWED.get(kind, TOLERANCE)
    return int(failed)


if __name__ == "__main__":
    if sys.argv[1:2] == ["compare"]:
        sys.exit(compare(*map(Path, sys.argv[2:])))
    write(Path(sys.argv[2]))
