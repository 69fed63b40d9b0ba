"""How fast the posterior is drawn, against samplers of general purpose, in one run.

    .venv/bin/pip install '.[bench]' && .venv/bin/python tests/benchmarks/speed.py

Every figure is a ratio within this run: effective draws per second of the worst
headline parameter.  Compilation, warm-up and the search for the mode are left out
on the rivals' side and, but for compilation, included on ours; all run on the
threads stated.  NUTS has one chain.  Agreement is the largest difference of a
headline mean from ours, in combined Monte Carlo errors.
"""

from __future__ import annotations

import argparse
import os
import platform
import sys
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

import emcee
import jax
import models
import numpy as np
import numpyro
from ladders import TRUTH, reference_ladder
from models import HEADLINE
from numpyro.infer import MCMC, NUTS, init_to_value

from ladderfit.diagnostics import ess_of_mean
from ladderfit.kernels.compiling import threads
from ladderfit.ladder import Ladder, read_ladder
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.direct import find_modes
from ladderfit.sampling.moves import moves
from ladderfit.sampling.run import draw, target

SAMPLE = Path(__file__).parents[2] / "sample_data" / "sample.toml"
REFERENCE = "3,040 Cepheids in 38 hosts, 75 parallax stars, 42 + 280 supernovae"
PHI = ("zero_point", "slope", "metallicity", "scatter", "parallax_offset", "peak_scatter")


@dataclass
class Outcome:
    """Draws of the headline parameters, shape (chains, n), and the time they took."""

    label: str
    draws: Mapping[str, np.ndarray]
    seconds: float
    independent: float | None = None  # effective draws, where known without autocorrelation

    def effective(self, name: str) -> float:
        return self.independent or ess_of_mean(self.draws[name])

    @property
    def worst(self) -> tuple[str, float]:
        found = {name: self.effective(name) for name in self.draws}
        name = min(found, key=found.__getitem__)
        return name, found[name]

    @property
    def rate(self) -> float:
        return self.worst[1] / self.seconds

    def disagreement(self, other: Outcome) -> float:
        """Largest difference of means, in combined Monte Carlo errors."""
        found = 0.0
        for name in set(self.draws) & set(other.draws):
            error2 = sum(np.var(o.draws[name]) / o.effective(name) for o in (self, other))
            gap = np.mean(self.draws[name]) - np.mean(other.draws[name])
            found = max(found, abs(gap) / np.sqrt(error2))
        return found


def run_direct(ladder: Ladder, draws: int = 4100) -> Outcome:
    draw(ladder, seed=1, draws=500)  # compiled and cached from here on
    best = np.inf
    for seed in (1, 2, 3):
        start = time.perf_counter()
        result = draw(ladder, seed=seed, draws=draws)
        best = min(best, time.perf_counter() - start)
    found = {name: result.draws[name][None, :] for name in HEADLINE}
    return Outcome("direct", found, best, result.diagnostics.ess["slope"])


def run_ensemble(ladder: Ladder, steps: int = 1500, walkers: int = 48) -> Outcome:
    """emcee on the collapsed density, as the `ensemble` sampler has it, without disk."""
    joint = posterior(ladder)
    mode = find_modes(target(joint), np.random.default_rng(1))[0]
    rng = np.random.default_rng(2)
    factor = np.linalg.cholesky(mode.covariance)
    start = mode.point + rng.standard_normal((walkers, joint.dimension)) @ factor.T
    sampler = emcee.EnsembleSampler(
        walkers, joint.dimension, joint.log_density, vectorize=True, moves=moves()
    )
    state = sampler.run_mcmc(start, 300)
    sampler.reset()
    begin = time.perf_counter()
    sampler.run_mcmc(state, steps)
    chain = sampler.get_chain()
    draws = joint.draw(chain.reshape(-1, joint.dimension), rng)
    seconds = time.perf_counter() - begin
    found = {name: draws[name].reshape(steps, walkers).T for name in HEADLINE}
    return Outcome("ensemble (collapsed)", found, seconds)


def run_nuts_uncollapsed(ladder: Ladder, samples: int) -> Outcome:
    data = models.arrays(ladder)
    start = {name: TRUTH[name] for name in HEADLINE if name != "hubble_constant"}
    start["h"] = 5.0 * np.log10(TRUTH["hubble_constant"])
    start["mu"] = np.zeros(data["hosts"])
    start["near_mu"] = np.zeros(len(data["plx"]))
    kernel = NUTS(models.uncollapsed, init_strategy=init_to_value(values=start))
    chain = MCMC(kernel, num_warmup=400, num_samples=samples, progress_bar=False)
    return _nuts("NUTS, uncollapsed", chain, (data,), lambda s: {n: s[n] for n in HEADLINE})


def run_nuts_collapsed(ladder: Ladder, samples: int) -> Outcome:
    log_density = models.collapsed(models.arrays(ladder))
    kernel = NUTS(potential_fn=lambda z: -log_density(z), dense_mass=True)
    chain = MCMC(kernel, num_warmup=500, num_samples=samples, progress_bar=False)
    start = np.array([TRUTH[name] for name in PHI])
    return _nuts(
        "NUTS, collapsed, dense mass",
        chain,
        (),
        _phi_by_name,
        init_params=start,
    )


def _phi_by_name(samples: np.ndarray) -> dict[str, np.ndarray]:
    """Scatters count by their size."""
    columns = dict(zip(PHI, np.asarray(samples).T, strict=True))
    return {name: np.abs(v) if "scatter" in name else v for name, v in columns.items()}


def _nuts(
    label: str,
    chain: MCMC,
    arguments: tuple[object, ...],
    named: Callable[[object], Mapping[str, object]],
    **options: object,
) -> Outcome:
    chain.warmup(jax.random.PRNGKey(1), *arguments, **options)
    chain.run(jax.random.PRNGKey(2), *arguments, **options)  # compiles the sampling
    chain.post_warmup_state = chain.last_state
    start = time.perf_counter()
    chain.run(jax.random.PRNGKey(3), *arguments, **options)
    draws = named(jax.block_until_ready(chain.get_samples()))
    seconds = time.perf_counter() - start
    return Outcome(label, {n: np.asarray(v)[None, :] for n, v in draws.items()}, seconds)


def run_emcee_everywhere(ladder: Ladder, seconds: float) -> Outcome:
    """emcee over every dimension of the uncollapsed model, for a fixed time."""
    data = models.arrays(ladder)
    hosts, near = data["hosts"], len(data["plx"])
    centre = [TRUTH[name] for name in HEADLINE[:-1]] + [5.0 * np.log10(TRUTH["hubble_constant"])]
    size = len(centre) + hosts + near
    rng = np.random.default_rng(1)
    start = np.concatenate([centre, np.zeros(hosts + near)])
    start = start + 0.01 * rng.standard_normal((2 * size + 2, size))
    start[:, [3, 6]] = np.abs(start[:, [3, 6]])
    log_density = _uncollapsed_numpy(data)
    sampler = emcee.EnsembleSampler(len(start), size, log_density, vectorize=True)
    begin = time.perf_counter()
    state = start
    while time.perf_counter() - begin < seconds:
        state = sampler.run_mcmc(state, 100)
    taken = time.perf_counter() - begin
    chain = sampler.get_chain()
    chain = chain[len(chain) // 3 :]
    draws = {name: chain[:, :, i].T for i, name in enumerate(HEADLINE)}
    draws["hubble_constant"] = 10.0 ** (0.2 * draws["hubble_constant"])
    return Outcome(f"emcee over all {size} dimensions", draws, taken)


def _uncollapsed_numpy(d: dict[str, np.ndarray]) -> Callable[[np.ndarray], np.ndarray]:
    hosts = d["hosts"]

    def gauss(residual: np.ndarray, variance: np.ndarray) -> np.ndarray:
        return -0.5 * (residual**2 / variance + np.log(variance)).sum(axis=1)

    def log_density(z: np.ndarray) -> np.ndarray:
        b, m0, met, t, off, peak, wide, h = z[:, :8].T[:, :, None]
        mu = d["start"] + z[:, 8 : 8 + hosts]
        near = d["near_start"] + z[:, 8 + hosts :]
        line = m0 + b * d["x"] + met * d["o"]
        total = gauss(d["m"] - mu[:, d["host"]] - line, d["s2"] + t**2)
        line = m0 + b * d["near_x"] + met * d["near_o"]
        total += gauss(d["near_m"] - near - line, d["near_s2"] + t**2)
        total += gauss(d["plx"] - 10.0 ** (2.0 - 0.2 * near) - off, d["e_plx"] ** 2 + 0.0 * off)
        total += gauss(d["anchor"] - mu[:, d["anchor_host"]], d["anchor_s"] ** 2 + 0.0 * off)
        total += gauss(d["peak"] - mu[:, d["peak_host"]] - peak, d["peak_s2"] + wide**2)
        total += gauss(d["flow"] - peak + h, d["flow_s2"] + wide**2)
        p = z[:, :8]
        mean = np.array([-3.3, -5.9, -0.2, 0.0, 0.0, -19.3, 0.0, 5.0 * np.log10(70.0)])
        total -= 0.5 * (((p - mean) / [0.5, 2.0, 0.5, 0.3, 0.02, 2.0, 0.3, 1.0]) ** 2).sum(axis=1)
        return np.where((p[:, 3] > 0.0) & (p[:, 6] > 0.0), total, -np.inf)

    return log_density


def table(title: str, outcomes: list[Outcome]) -> None:
    ours = outcomes[0]
    print(f"\n{title}")
    print(f"{'':32}{'seconds':>9}{'worst parameter':>18}{'effective':>11}", end="")
    print(f"{'per second':>12}{'ours is':>10}{'agreement':>11}")
    for found in outcomes:
        name, effective = found.worst
        gap = "" if found is ours else f"{found.disagreement(ours):.1f}"
        ratio = "" if found is ours else f"{ours.rate / found.rate:,.0f} x"
        print(f"{found.label:32}{found.seconds:9.3f}{name:>18}{effective:11,.0f}", end="")
        print(f"{found.rate:12,.1f}{ratio:>10}{gap:>11}", flush=True)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--quick", action="store_true", help="fewer draws by the rivals")
    parser.add_argument("--sizes", action="store_true", help="ours alone, up to a million stars")
    parser.add_argument("--reference", action="store_true", help="the reference ladder alone")
    arguments = parser.parse_args()
    numpyro.set_host_device_count(1)
    print(
        f"python {platform.python_version()}, {os.cpu_count()} cores, {platform.machine()};", end=""
    )
    print(f" our kernels on {threads()} threads; jax {jax.__version__}", end="")
    print(f", numpyro {numpyro.__version__}, emcee {emcee.__version__}")
    few = arguments.quick
    if not arguments.sizes:
        ladders = {"The sample": read_ladder(SAMPLE), REFERENCE: reference_ladder()}
        if arguments.reference:
            del ladders["The sample"]
        for title, ladder in ladders.items():
            outcomes = [
                run_direct(ladder),
                run_ensemble(ladder, 400 if few else 1500),
                run_nuts_collapsed(ladder, 300 if few else 2000),
                run_nuts_uncollapsed(ladder, 100 if few else 500),
                run_emcee_everywhere(ladder, 10.0 if few else 60.0),
            ]
            table(title, outcomes)
    if arguments.reference:
        return
    for cepheids in (1_000, 10_000, 100_000, 1_000_000):
        ladder = reference_ladder(cepheids=cepheids)
        outcomes = [run_direct(ladder), run_ensemble(ladder, 200)]
        table(f"{cepheids:,} Cepheids in 38 hosts, the rest as before", outcomes)


if __name__ == "__main__":
    sys.exit(main())
