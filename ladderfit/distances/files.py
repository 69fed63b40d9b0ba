"""Distances of new hosts in words, and as tables in a folder."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from ladderfit.distances.moduli import Distances, megaparsecs
from ladderfit.names import with_group
from ladderfit.report.cells import (
    Cell,
    PaperTable,
    Quoted,
    Words,
    number_column,
    quoted,
    text_column,
)
from ladderfit.report.files import write_tables
from ladderfit.report.parameters import ERRORS_NOTE, moduli_covariance
from ladderfit.result import Diagnostics, Result
from ladderfit.rounding import to_place
from ladderfit.store import write_netcdf
from ladderfit.wording import aligned, pareto_words, printable


def distances_text(found: Distances) -> str:
    """What was found, for a terminal: moduli, distances, warnings, how far to trust them.

    Parameters
    ----------
    found : Distances

    Returns
    -------
    str
        Several paragraphs, without a line break at the end.
    """
    rows = [("host", "modulus [mag]", "distance [Mpc]", "Cepheids", "supernovae")]
    for host in found.hosts:
        modulus, distance = _quoted(found, host)
        stars, peaks = found.counts[host]
        rows.append((printable(host), str(modulus), str(distance), f"{stars:,}", f"{peaks:,}"))
    kept = [(_KINDS[key], printable(str(kept))) for key, kept in found.kept.items()]
    trust = [f"{found.ess:,.0f} effective draws"]
    if found.route == "weights":
        k = to_place(found.pareto_k, -2)
        trust.append(
            f"Pareto k = {k} of the weights of the saved draws: {pareto_words(found.pareto_k)}"
        )
    trust += [f"Note: {printable(note)}" for note in found.notes]
    sections = [
        ("New objects", aligned(kept)),
        ("Distances, as if the new objects had been in the fit without an anchor", aligned(rows)),
        ("Outside what was calibrated", [printable(words) for words in found.warnings]),
        ("How far to trust it", trust),
    ]
    return "\n\n".join(
        "\n".join([heading, *(f"  {line}" for line in lines)])
        for heading, lines in sections
        if lines
    )


_KINDS = {"cepheids": "Cepheids", "supernovae": "supernovae"}


def _quoted(found: Distances, host: str) -> tuple[Quoted, Quoted]:
    draws = found.draws[host]
    return quoted(draws, found.ess), quoted(megaparsecs(draws), found.ess)


def distance_table(found: Distances) -> PaperTable:
    """Moduli and distances of the new hosts."""
    summary = found.summary()
    numbers = [_quoted(found, host) for host in found.hosts]
    columns = [text_column("host", list(found.hosts))]
    for name in summary.columns:
        unit = "mag" if name.startswith("modulus") else "Mpc" if name.startswith("dist") else ""
        columns.append(number_column(name, summary[name], unit))
    rows: tuple[tuple[Cell, ...], ...] = tuple(
        (Words(host), modulus, distance, *(f"{count:,}" for count in found.counts[host]))
        for host, (modulus, distance) in zip(found.hosts, numbers, strict=True)
    )
    return PaperTable(
        name="distances",
        title="Distance moduli and distances of new hosts",
        columns=tuple(columns),
        head=("Host", "Modulus (mag)", "Distance (Mpc)", "Cepheids", "Supernovae"),
        rows=rows,
        notes=(ERRORS_NOTE, *found.warnings, *found.notes),
    )


def write_distances(found: Distances, result: Result, folder: Path) -> None:
    """Write the distances, their covariance and their draws into an existing folder.

    Parameters
    ----------
    found : Distances
    result : Result
        The calibration.
    folder : Path

    Raises
    ------
    OSError
        If a file cannot be written.
    """
    tables = [distance_table(found), moduli_covariance(found.hosts, found.covariance())]
    write_tables(tables, folder, result.choices.title)
    draws = {with_group("modulus", host): np.asarray(found.draws[host]) for host in found.hosts}
    diagnostics = Diagnostics(
        sampler=found.route,
        seed=result.diagnostics.seed,
        ess=dict.fromkeys(draws, found.ess),
        pareto_k=found.pareto_k,
    )
    write_netcdf(Result(result.choices, draws, diagnostics), folder / "posterior.nc")
