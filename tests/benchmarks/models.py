"""The same posterior in two other forms, for samplers of general purpose.

`uncollapsed` is the hierarchical model with every modulus as a parameter, for a
gradient sampler or for an ensemble over all dimensions; `collapsed` is the density
of phi with all else integrated out, written in JAX.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import jax
import jax.numpy as jnp
import numpy as np
import numpyro
import numpyro.distributions as dist

from ladderfit.ladder import Ladder
from ladderfit.physics.expansion import distance_term, peculiar_variance

jax.config.update("jax_enable_x64", True)
K = np.log(10.0) / 5.0
HEADLINE = (
    "slope",
    "zero_point",
    "metallicity",
    "scatter",
    "parallax_offset",
    "peak_magnitude",
    "peak_scatter",
    "hubble_constant",
)


def arrays(ladder: Ladder) -> dict[str, Any]:
    """Everything the models need, as plain arrays."""
    stars, near, peaks, flow = ladder.cepheids, ladder.parallax_stars, ladder.peaks, ladder.flow
    term = distance_term(flow.redshift, flow.redshift_heliocentric, -0.55, 1.0)
    hosts = len(ladder.hosts)
    apparent = np.bincount(
        stars.host, stars.magnitude + 5.9 + 3.3 * (stars.log_period - 1.0), minlength=hosts
    )
    return {
        "hosts": hosts,
        "host": stars.host,
        "x": stars.log_period - 1.0,
        "o": stars.metallicity - 8.69,
        "m": stars.magnitude,
        "s2": stars.variance,
        "near_x": near.log_period - 1.0,
        "near_o": near.metallicity - 8.69,
        "near_m": near.magnitude,
        "near_s2": near.variance,
        "plx": near.parallax,
        "e_plx": near.parallax_error,
        "peak_host": peaks.host,
        "peak": peaks.magnitude,
        "peak_s2": peaks.variance,
        "flow": flow.magnitude - term,
        "flow_s2": flow.variance + peculiar_variance(flow.redshift, 250.0),
        "anchor_host": np.array([a.host for a in ladder.geometric]),
        "anchor": np.array([a.modulus for a in ladder.geometric]),
        "anchor_s": np.array([a.error for a in ladder.geometric]),
        "start": apparent / np.bincount(stars.host, minlength=hosts),
        "near_start": near.magnitude + 5.9 + 3.3 * (near.log_period - 1.0),
    }


def uncollapsed(d: dict[str, Any]) -> None:
    """The hierarchical model, every modulus a parameter (flat, in a box of 10 mag)."""
    slope = numpyro.sample("slope", dist.Normal(-3.3, 0.5))
    zero = numpyro.sample("zero_point", dist.Normal(-5.9, 2.0))
    metals = numpyro.sample("metallicity", dist.Normal(-0.2, 0.5))
    scatter = numpyro.sample("scatter", dist.HalfNormal(0.3))
    offset = numpyro.sample("parallax_offset", dist.Normal(0.0, 0.02))
    peak = numpyro.sample("peak_magnitude", dist.Normal(-19.3, 2.0))
    wide = numpyro.sample("peak_scatter", dist.HalfNormal(0.3))
    hubble = numpyro.sample("h", dist.Normal(5.0 * np.log10(70.0), 1.0))
    numpyro.deterministic("hubble_constant", 10.0 ** (0.2 * hubble))
    box = dist.Uniform(-5.0, 5.0)
    mu = d["start"] + numpyro.sample("mu", box.expand([d["hosts"]]).to_event(1))
    near = d["near_start"] + numpyro.sample("near_mu", box.expand([len(d["plx"])]).to_event(1))

    def observe(name: str, mean: Any, variance: Any, value: Any) -> None:
        numpyro.sample(name, dist.Normal(mean, jnp.sqrt(variance)), obs=value)

    line = zero + slope * d["x"] + metals * d["o"]
    observe("stars", mu[d["host"]] + line, d["s2"] + scatter**2, d["m"])
    line = zero + slope * d["near_x"] + metals * d["near_o"]
    observe("near", near + line, d["near_s2"] + scatter**2, d["near_m"])
    observe("plx", 10.0 ** (2.0 - 0.2 * near) + offset, d["e_plx"] ** 2, d["plx"])
    observe("anchors", mu[d["anchor_host"]], d["anchor_s"] ** 2, d["anchor"])
    observe("peaks", mu[d["peak_host"]] + peak, d["peak_s2"] + wide**2, d["peak"])
    observe("flow", peak - hubble, d["flow_s2"] + wide**2, d["flow"])


def collapsed(d: dict[str, Any]) -> Callable[[Any], Any]:
    """Log density of (zero point, slope, metallicity, scatter, offset, peak scatter)."""
    hosts = d["hosts"]

    def log_density(z: Any) -> Any:
        zero, slope, metals, scatter, offset, wide = z
        w = 1.0 / (d["s2"] + scatter**2)
        r = d["m"] - d["start"][d["host"]] - zero - slope * d["x"] - metals * d["o"]
        a = jax.ops.segment_sum(w, d["host"], hosts)
        b = jax.ops.segment_sum(w * r, d["host"], hosts)
        total = 0.5 * jnp.sum(jnp.log(w)) - 0.5 * jnp.sum(w * r**2)
        w = 1.0 / d["anchor_s"] ** 2
        r = d["anchor"] - d["start"][d["anchor_host"]]
        a, b = a.at[d["anchor_host"]].add(w), b.at[d["anchor_host"]].add(w * r)
        total += -0.5 * jnp.sum(w * r**2)
        w = 1.0 / (d["peak_s2"] + wide**2)
        r = d["peak"] - d["start"][d["peak_host"]] + 19.3
        a, b = a.at[d["peak_host"]].add(w), b.at[d["peak_host"]].add(w * r)
        c = jax.ops.segment_sum(w, d["peak_host"], hosts)
        total += 0.5 * jnp.sum(jnp.log(w)) - 0.5 * jnp.sum(w * r**2)
        peak_w, peak_b = jnp.sum(w), jnp.sum(w * r)
        w = 1.0 / (d["flow_s2"] + wide**2)
        centre = 5.0 * np.log10(70.0)
        r = d["flow"] + 19.3 + centre
        total += 0.5 * jnp.sum(jnp.log(w)) - 0.5 * jnp.sum(w * r**2)
        total += 0.5 * jnp.sum(b**2 / a) - 0.5 * jnp.sum(jnp.log(a))
        precision = jnp.array(
            [
                [peak_w - jnp.sum(c**2 / a) + jnp.sum(w) + 0.25, -jnp.sum(w)],
                [-jnp.sum(w), jnp.sum(w) + 1.0],
            ]
        )
        linear = jnp.array([peak_b - jnp.sum(c * b / a) + jnp.sum(w * r), -jnp.sum(w * r)])
        total += 0.5 * linear @ jnp.linalg.solve(precision, linear)
        total -= 0.5 * jnp.linalg.slogdet(precision)[1]
        prior = dist.Normal(-5.9, 2.0).log_prob(zero) + dist.Normal(-3.3, 0.5).log_prob(slope)
        prior += dist.Normal(-0.2, 0.5).log_prob(metals)
        prior += dist.Normal(0.0, 0.02).log_prob(offset)
        prior += -0.5 * (scatter / 0.3) ** 2 - 0.5 * (wide / 0.3) ** 2
        return total + prior + jnp.sum(_near(d, zero, slope, metals, scatter, offset))

    return log_density


def _near(d: dict[str, Any], zero: Any, slope: Any, metals: Any, scatter: Any, offset: Any) -> Any:
    """Parallax stars by a trapezoidal rule of 41 nodes in the stretched coordinate."""
    a = d["near_m"] - zero - slope * d["near_x"] - metals * d["near_o"]
    root = jnp.sqrt(d["near_s2"] + scatter**2)
    plx, err = d["plx"] - offset, d["e_plx"]
    scale = err / (K * root)

    def y_of(u: Any) -> Any:
        return jnp.where(u > 30.0, u, jnp.log(jnp.expm1(jnp.minimum(u, 30.0))))

    ends = y_of(jnp.exp(K * (10.0 - a)) / scale), y_of(jnp.maximum(plx, 0.5 * err) / scale)
    low = jnp.minimum(*ends) - 6.5 * K * root
    high = jnp.maximum(*ends) + 6.5 * K * root
    y = low + jnp.linspace(0.0, 1.0, 41)[:, None] * (high - low)
    u = jnp.logaddexp(0.0, y)
    mu = 10.0 - jnp.log(u * scale) / K
    value = -0.5 * ((mu - a) / root) ** 2 - 0.5 * ((u * scale - plx) / err) ** 2
    value += (y - u) - jnp.log(u) - jnp.log(root)
    return jax.scipy.special.logsumexp(value, axis=0) + jnp.log((high - low) / 40.0)
