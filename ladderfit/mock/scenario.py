"""The scenario of the sample: the Stepstone survey of the Ennick Observatory, both invented.

``python -m ladderfit.mock DIR`` writes the sample's files; the same seed gives
the same bytes.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from ladderfit.files import write_text_atomically
from ladderfit.mock.plan import Host, Mock, Plan
from ladderfit.mock.survey import simulate
from ladderfit.mock.tables import ecsv, truth_toml
from ladderfit.mock.tripp import tripp_files

SEED = 20261  # chosen before the first fit, and never since

PLAN = Plan(
    hosts=(
        Host("Tavin", 18.494, 132, 3.2, 0.10, 8.55, 0.20, geometric_error=0.025, overtones=0.30),
        Host("Orsell", 29.402, 141, 4.5, 0.16, 9.00, 0.45, geometric_error=0.032, overtones=0.10),
        Host("Brelin", 29.137, 150, 5.5, 0.20, 8.95, 0.40, supernovae=2),
        Host("Cadvo", 29.684, 108, 6.0, 0.14, 8.85, 0.35, supernovae=1),
        Host("Dornash", 30.052, 86, 7.0, 0.11, 8.80, 0.30, supernovae=1),
        Host("Elquist", 30.391, 94, 7.5, 0.18, 8.98, 0.42, supernovae=2),
        Host("Fenoru", 30.608, 61, 8.0, 0.09, 8.70, 0.25, supernovae=1),
        Host("Galvesh", 30.846, 73, 8.5, 0.22, 9.00, 0.38, supernovae=1),
        Host("Hestrin", 31.033, 55, 9.0, 0.13, 8.88, 0.33, supernovae=1),
        Host("Iloway", 31.175, 47, 9.0, 0.16, 8.92, 0.36, supernovae=2),
        Host("Jurbane", 31.288, 66, 9.5, 0.12, 8.86, 0.40, supernovae=1),
        Host("Kelmora", 31.420, 38, 10.0, 0.15, 8.78, 0.28, supernovae=1),
        Host("Lindrak", 31.536, 52, 10.0, 0.19, 8.96, 0.41, supernovae=1),
        Host("Morvand", 31.657, 33, 10.5, 0.10, 8.74, 0.24, supernovae=1),
        Host("Nesquel", 31.782, 44, 11.0, 0.17, 8.93, 0.37, supernovae=1),
        Host("Oltrave", 31.909, 29, 11.5, 0.14, 8.83, 0.31, supernovae=2),
        Host("Perimar", 32.061, 36, 12.0, 0.12, 8.90, 0.39, supernovae=1),
        Host("Quandrel", 32.194, 24, 13.0, 0.18, 8.97, 0.34, supernovae=1),
        Host("Rostive", 32.375, 31, 13.5, 0.11, 8.81, 0.27, supernovae=1),
        Host("Selvane", 32.548, 19, 15.0, 0.16, 8.94, 0.43, supernovae=1),
        Host("Ubrith", 32.713, 22, 16.0, 0.13, 8.87, 0.32, supernovae=2),
        Host("Vestow", 32.921, 15, 18.0, 0.15, 8.91, 0.35, supernovae=1),
    )
)

_LADDER = """\
# The Stepstone survey of the Ennick Observatory: observatory, survey and galaxies
# are invented, the data are simulated.  What is true is in truth.toml.
title = "Sample ladder"

[cepheids]
table     = "cepheids.ecsv"
columns   = {{star = "ID", host = "Galaxy", period = "P", metallicity = "OH", mode = "Mode"}}
periods   = [5.0, 100.0]           # d
overtones = "drop"
set_aside = [{{star = "Fen-017", reason = "at the edge of the H frame"}}]

[cepheids.magnitude]
wesenheit = {{band = "H", colour = ["V", "I"], ratio = {ratio}}}
bands     = {{H = "Hmag", V = "Vmag", I = "Imag"}}    # mag
errors    = {{H = "e_H", V = "e_V", I = "e_I"}}       # mag

[relation]
pivot       = {pivot}               # d; the zero point is stated here
metallicity = {{reference = {reference}, scale = "12+log(O/H)"}}

{anchors}
[anchors.parallaxes]
table          = "parallax_stars.ecsv"
columns        = {{star = "ID", period = "P", metallicity = "OH", mode = "Mode", \
parallax = "plx", parallax_error = "e_plx"}}
corrected      = true              # a published zero-point recipe is already applied
distance_prior = "flat in modulus"
periods        = [4.0, 100.0]      # d
use            = true

[supernovae]
table   = "supernovae.ecsv"
columns = {{name = "SN", host = "Galaxy", peak = "mB", peak_error = "e_mB"}}

[expansion]
table     = "flow.ecsv"
columns   = {{name = "SN", redshift = "zcmb", redshift_heliocentric = "zhel", \
peak = "mB", peak_error = "e_mB"}}
redshifts = [{flow[0]}, {flow[1]}]
q0        = {q0}
j0        = {j0}
peculiar_velocity = {velocity}          # km/s

[priors]                           # normal: mean, sd; half-normal: sd
slope           = {{normal = [-3.3, 0.5]}}           # mag/dex
scatter         = {{half_normal = 0.3}}              # mag
parallax_offset = {{normal = [0.0, 0.02]}}           # mas
hubble_constant = {{log_normal = [70.0, 1.0]}}       # km/s/Mpc; sd in mag of 5 log10 H0

[sampling]
sampler = "direct"
draws   = 4000
seed    = 1

[alternatives]                     # keys are those of this file
"anchors.geometric.Tavin.use"  = [false]
"anchors.geometric.Orsell.use" = [false]
"anchors.parallaxes.use"       = [false]
"cepheids.periods"             = [[10.0, 100.0], [5.0, 60.0]]
"""

_ANCHOR = """\
[anchors.geometric.{host}]
modulus = {modulus:.3f}                 # mag
error   = {error:.3f}
use     = true
"""


def sample_files() -> dict[str, str]:
    """The sample's files by name, as text."""
    mock = simulate(PLAN, np.random.default_rng(SEED))
    ladder = _ladder_text(PLAN, mock)
    return {
        "sample.toml": ladder,
        "cepheids.ecsv": ecsv(mock.cepheids),
        "parallax_stars.ecsv": ecsv(mock.parallax_stars),
        "supernovae.ecsv": ecsv(mock.supernovae),
        "flow.ecsv": ecsv(mock.flow),
        "truth.toml": truth_toml(
            mock.truth, SEED, "To make the sample again: python -m ladderfit.mock FOLDER"
        ),
        **tripp_files(PLAN, ladder),
    }


def write_sample(folder: Path) -> None:
    """Write the sample's files into a folder, which is made if need be."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, text in sample_files().items():
        write_text_atomically(folder / name, text)


def _ladder_text(plan: Plan, mock: Mock) -> str:
    anchors = "\n".join(
        _ANCHOR.format(host=host, modulus=modulus, error=error)
        for host, (modulus, error) in mock.anchors.items()
    )
    return _LADDER.format(
        anchors=anchors,
        ratio=plan.ratio,
        pivot=plan.pivot,
        reference=plan.reference,
        flow=plan.flow_redshifts,
        q0=plan.q0,
        j0=plan.j0,
        velocity=plan.peculiar_velocity,
    )
