"""The peak-magnitude relation with noisy width and colour, drawn by us and by a gradient sampler.

    python tests/benchmarks/peaks.py [--quick]

Both have the same ladder: hosts of known distance with a supernova each, and an
expansion, each supernova with a measured width and colour.  The gradient sampler
(numpyro's NUTS) keeps every true width and colour and every modulus as a parameter;
we integrate them.  Printed are both answers, with their differences in Monte Carlo
errors, processor time per effective draw, and what one density costs with and without
a full covariance of the peaks.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Mapping
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import numpyro
import numpyro.distributions as dist
from numpyro.diagnostics import effective_sample_size
from numpyro.infer import MCMC, NUTS

from ladderfit.inputs.peaks import error_blocks
from ladderfit.ladder import Ladder, build_ladder
from ladderfit.mock.light_curves import LightCurves
from ladderfit.mock.peaks import flow_supernovae, host_supernovae
from ladderfit.mock.plan import Host, Plan
from ladderfit.physics.expansion import distance_term, peculiar_variance
from ladderfit.posterior.joint import posterior
from ladderfit.sampling.run import drawn, target

jax.config.update("jax_enable_x64", True)
INPUTS = ("width", "colour")
COLUMNS = {
    "name": "SN",
    "peak": "mB",
    "peak_error": "e_mB",
    "width": "w",
    "width_error": "e_w",
    "colour": "c",
    "colour_error": "e_c",
    "peak_width_covariance": "cov_mw",
    "peak_colour_covariance": "cov_mc",
    "width_colour_covariance": "cov_wc",
    "host_mass": "logM",
}
ERROR = 0.05  # mag, of the hosts' moduli
GROUPS = ("hosts", "expansion")
HEADLINE = (
    "alpha",
    "beta",
    "mass_step",
    "peak_magnitude",
    "peak_scatter",
    "hubble_constant",
    *(f"{name}_{what}[{g}]" for g in GROUPS for name in INPUTS for what in ("mean", "spread")),
)


def ladder(flow: int = 250, hosts: int = 20, covariance: str = "none") -> Ladder:
    """Simulated supernovae; a covariance has 40 patterns that all share, or is full."""
    plan = Plan(
        hosts=tuple(
            Host(f"Isle{i:03d}", 29.0 + 4.0 * i / hosts, 0, supernovae=1) for i in range(hosts)
        ),
        flow=flow,
        flow_outside=0,
        light_curves=LightCurves(offsets={"Ennick": 0.0}),
    )
    rng = np.random.default_rng(17)
    moduli = {
        h.name: {"modulus": h.modulus + ERROR * rng.normal(), "error": ERROR} for h in plan.hosts
    }
    choices: dict[str, Any] = {
        "anchors": {"geometric": moduli},
        "supernovae": {"columns": COLUMNS | {"host": "Galaxy"}},
        "expansion": {"columns": COLUMNS | {"redshift": "zcmb", "redshift_heliocentric": "zhel"}},
        "peak_relation": {"width": {}, "colour": {}, "host_mass": {}},
    }
    tables = {"supernovae": host_supernovae(plan, rng), "expansion": flow_supernovae(plan, rng)}
    if covariance != "none":
        choices["supernovae"]["covariance"] = {"adds": True}
        patterns = 0.01 * rng.normal(size=(flow + hosts, 40))
        tables["supernovae.covariance"] = patterns @ patterns.T
        if covariance == "full":
            own = np.diag(0.01**2 * np.ones(flow + hosts))
            tables["supernovae.covariance"] = patterns @ patterns.T + own
    return build_ladder(choices, tables)


def arrays(found: Ladder) -> dict[str, dict[str, Any]]:
    """Measured peaks, widths and colours with their covariances, as plain arrays."""
    data = {}
    for group, sample in zip(GROUPS, (found.peaks, found.flow), strict=True):
        own, with_peak = error_blocks(sample, INPUTS)
        whole = np.zeros((len(sample), 3, 3))
        whole[:, 0, 0], whole[:, 1:, 1:] = sample.variance, own
        whole[:, 0, 1:] = whole[:, 1:, 0] = with_peak
        level = 0.0
        if group == "expansion":
            whole[:, 0, 0] += peculiar_variance(sample.redshift, 250.0)
            level = distance_term(sample.redshift, sample.redshift_heliocentric, -0.55, 1.0)
        inputs = sample.inputs.values
        seen = np.stack([sample.magnitude - level, inputs["width"], inputs["colour"]], axis=1)
        step = np.where(inputs["host_mass"] >= 10.0, 0.5, -0.5)
        data[group] = {"seen": seen, "errors": whole, "step": step}
    host = np.array([anchor.host for anchor in found.geometric])
    data["hosts"] |= {
        "modulus": np.array([a.modulus for a in found.geometric])[np.argsort(host)][
            found.peaks.host
        ]
    }
    return data


def model(data: dict[str, dict[str, Any]]) -> None:
    """Every true width, colour and modulus is a parameter; one supernova in each host."""
    alpha = numpyro.sample("alpha", dist.Normal(0.0, 2.0))
    beta = numpyro.sample("beta", dist.Normal(3.0, 2.0))
    step = numpyro.sample("mass_step", dist.Normal(0.0, 0.1))
    peak = numpyro.sample("peak_magnitude", dist.Normal(-19.3, 2.0))
    scatter = numpyro.sample("peak_scatter", dist.HalfNormal(0.3))
    rate = numpyro.sample("h", dist.Normal(5.0 * np.log10(70.0), 1.0))
    numpyro.deterministic("hubble_constant", 10.0 ** (0.2 * rate))
    for group in GROUPS:
        part, n = data[group], len(data[group]["seen"])
        true = []
        for name, mean_sd, spread_sd in (("width", 2.0, 2.0), ("colour", 0.3, 0.3)):
            mean = numpyro.sample(f"{name}_mean[{group}]", dist.Normal(0.0, mean_sd))
            spread = numpyro.sample(f"{name}_spread[{group}]", dist.HalfNormal(spread_sd))
            true.append(
                numpyro.sample(
                    f"{name}[{group}]", dist.Normal(mean, spread).expand([n]).to_event(1)
                )
            )
        level = peak - rate
        if group == "hosts":
            white = numpyro.sample("mu", dist.Normal(0.0, 1.0).expand([n]).to_event(1))
            level = peak + part["modulus"] + ERROR * white
        m = level - alpha * true[0] + beta * true[1] + step * part["step"]
        errors = part["errors"].copy()
        covariance = jnp.asarray(errors).at[:, 0, 0].add(scatter**2)
        mean = jnp.stack([m, *true], axis=1)
        numpyro.sample(
            f"seen[{group}]", dist.MultivariateNormal(mean, covariance), obs=part["seen"]
        )


def by_gradient(found: Ladder, draws: int) -> tuple[dict[str, np.ndarray], dict[str, float], float]:
    """Draws, effective draws and processor time of four chains."""
    start = time.process_time()
    chains = MCMC(
        NUTS(model, target_accept_prob=0.9),
        num_warmup=draws // 2,
        num_samples=draws,
        num_chains=4,
        chain_method="sequential",
        progress_bar=False,
    )
    chains.run(jax.random.PRNGKey(1), arrays(found))
    spent = time.process_time() - start
    kept = {n: np.asarray(v) for n, v in chains.get_samples(group_by_chain=True).items()}
    ess = {name: float(effective_sample_size(kept[name])) for name in HEADLINE}
    return {name: kept[name].ravel() for name in HEADLINE}, ess, spent


def compare(found: Ladder, draws: int) -> float:
    """Print both answers; the largest difference of means in Monte Carlo errors."""
    joint = posterior(found)
    drawn(joint, target(joint), 1, 500)  # compiles
    start = time.process_time()
    joint = posterior(found)
    result, _ = drawn(joint, target(joint), 1, 4000)
    ours = time.process_time() - start
    theirs, ess, spent = by_gradient(found, draws)
    print(f"{'':24}{'ours':>20}{'NUTS':>20}  apart  sd ratio")
    gaps = []
    for name in HEADLINE:
        mean, sd = float(theirs[name].mean()), float(theirs[name].std(ddof=1))
        error = np.hypot(
            result.sd(name) / np.sqrt(result.diagnostics.ess[name]), sd / np.sqrt(ess[name])
        )
        gaps.append(abs(result.mean(name) - mean) / error)
        print(
            f"{name:24}{result.mean(name):11.4f} ±{result.sd(name):7.4f}{mean:11.4f} ±{sd:7.4f}"
            f"{gaps[-1]:7.1f}{result.sd(name) / sd:9.3f}"
        )
    rates = {"ours": result.diagnostics.ess["alpha"] / ours, "NUTS": min(ess.values()) / spent}
    for who, rate in rates.items():
        print(f"  {who}: {rate:,.1f} effective draws a second of processor time, set-up included")
    return max(gaps)


def cost(flow: int, hosts: int, draws: int, covariance: str) -> None:
    """Print what one density costs."""
    joint = posterior(ladder(flow, hosts, covariance))
    values: Mapping[str, float] = {
        "alpha": 0.14,
        "beta": 3.1,
        "peak_scatter": 0.11,
        **{f"width_spread[{group}]": 0.9 for group in GROUPS},
        **{f"colour_spread[{group}]": 0.09 for group in GROUPS},
    }
    z = np.tile(joint.coordinates(values), (draws, 1))
    joint.log_density(z[:2])
    start = time.process_time()
    joint.log_density(z)
    spent = (time.process_time() - start) / draws
    words = f"{flow + hosts:,} supernovae, covariance: {covariance}"
    print(f"  {words:40} {1e3 * spent:9.3f} ms a density")


def main() -> None:
    """Compare answers, then costs."""
    quick = "--quick" in sys.argv[1:]
    worst = compare(ladder(), 500 if quick else 2000)
    print(f"largest difference: {worst:.1f} Monte Carlo errors")
    for flow, hosts in ((250, 25), (1623, 77)):
        for covariance, draws in (("none", 2000), ("40 patterns", 200), ("full", 20)):
            cost(flow, hosts, draws, covariance)


if __name__ == "__main__":
    main()
