"""The layout: what lies where, and one direction of imports."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

# Lowest layer first: a module imports only from modules before it.  A package
# stands after its own modules.  A new module must be given its place here.
ORDER = """
    errors rounding
    units files packed shipped priors names schema cosmologies
    choices.columns choices.covariance choices.photometry choices.outliers choices.stars
    choices.relation choices.parallaxes
    choices.anchors choices.photometry_checks choices.outlier_checks
    choices.peak_relation choices.third_rung choices.sampling choices.whole choices samples
    physics.photometry physics.zero_point physics.sky physics.expansion physics.overtones physics
    inputs.kinds inputs.tables inputs.table_columns inputs.table_memory inputs.table_files
    inputs.rows inputs.star_values inputs.parallaxes inputs.hosts inputs.select_stars
    inputs.peaks inputs.select_supernovae
    inputs.covariances inputs.covariance_rows inputs.correlated inputs
    sample_arrays classical.least_squares classical.lines classical.parallaxes classical
    relations clipping peak_terms ladder_file assembly photometry_notes consistency ladder
    ladder_copy ranges
    kernels.compiling kernels.narrow kernels.quadrature kernels.sightlines kernels.detection
    kernels.elimination kernels.sums kernels.arrow kernels.tridiagonal kernels.reduced
    kernels.coupled kernels.star_sums kernels.shared kernels.truncation kernels.populations
    kernels.wide
    kernels.downdate
    kernels.robust_rows kernels.robust_nodes kernels.robust kernels.robust_draw kernels
    posterior.frame posterior.errors_in_inputs posterior.colours posterior.cepheids posterior.moduli
    posterior.offsets posterior.families posterior.parallaxes
    posterior.split posterior.star_terms posterior.shared posterior.limits posterior.robust
    posterior.indices posterior.deviations
    posterior.supernovae posterior.peak_deviations posterior.coupled posterior.populations
    posterior.known_rows posterior.joint
    posterior.determined posterior
    diagnostics result result_files wording store
    sampling.mode sampling.proposal sampling.direct sampling.moves sampling.convergence
    sampling.ensemble sampling.chain_layout sampling.chain_reading sampling.chain_file
    sampling.run sampling.warm
    sampling.grow sampling.run_folder sampling.ensemble_result sampling.worker
    sampling.progress sampling.launch sampling.live
    sampling
    checks.peak_predictions checks.residuals checks.running checks.peak_views checks.outliers
    checks.statistics checks.supernovae
    checks.predictive checks.completeness checks
    report.cells report.machine report.latex_text report.latex report.parameters
    report.objects report.choices
    report.html report.budget report.files report.sections report.page report.write report
    influence.without influence.given influence.parallaxes influence.rebuilding influence.sets
    influence.blocks influence.correlated influence.populations influence.hosts influence.outliers
    influence.objects
    influence.reweighting influence.words influence.table influence
    predictive.likelihood predictive.fit predictive
    anchors.weights anchors.tension anchors.comparison anchors
    sensitivity.power_scaling sensitivity.redshift_cuts sensitivity.distance_priors
    sensitivity.error_budget sensitivity
    sweep.job sweep.records sweep.crews sweep.cluster sweep.run sweep.folder sweep
    alternatives.axes alternatives.fit alternatives.comparison alternatives.systematics
    alternatives.run alternatives.words alternatives.folder alternatives
    review.claims review.claims_file review.selection review.system review.fits
    review.resampling review.joint review.bench review.refits review.unstated review.reliance
    review.checks review.judged review.verdicts
    review.whole review.words review.page review
    distances.new_objects distances.joined_ladders distances.weights distances.moduli
    distances.files distances
    comparison.resampling comparison.results comparison.files comparison
    draft.facts draft.clues draft.roles draft.magnitudes draft.text draft.light_curves
    draft.jobs draft.entries
    draft.make draft.answers draft.asking draft.questions draft.settle draft.example draft
    mock.tables mock.light_curves mock.contamination mock.breakages mock.plan mock.stars mock.peaks
    mock.survey mock.parallax_survey mock.tripp mock.scenario
    mock.star_law mock.peak_redraw mock.photometry_redraw mock.parallax_redraw mock.restated
    mock.redraw mock.folder mock mock.__main__
    coverage.design coverage.ranks coverage.quantities coverage.outcome coverage.experiment
    coverage.words coverage.folder coverage
    plots.theme plots.density plots.relation plots.outliers plots.corner plots.parallax plots.moduli
    plots.hubble plots.peaks plots.cuts plots.checks plots.alternatives plots.review plots.anchors
    plots.influence plots.priors plots.coverage plots
    jobs.calibration jobs.repeat jobs.alternatives jobs.coverage jobs.review jobs
    workbench.why workbench.state workbench.rungs workbench.columns workbench.aside
    workbench.claims workbench.points workbench.shown workbench.slow workbench.works
    workbench.pins workbench.keeping workbench.long_runs
    workbench.tables workbench.comparing workbench.view_tables workbench.trial_tables
    workbench.axis workbench.pulse workbench.range workbench.controls workbench.selection_controls
    workbench.parallax_controls workbench.choices_panel
    workbench.canvas.margins workbench.canvas.view workbench.canvas.relation
    workbench.canvas.corner workbench.canvas.panels workbench.canvas.hubble
    workbench.canvas.parallaxes workbench.canvas.trials workbench.canvas.checks
    workbench.canvas.outliers workbench.canvas.published workbench.canvas
    workbench.views workbench.view_bar workbench.star_line workbench.published workbench.foot
    workbench.board_panel workbench.shelf workbench.frame workbench.screen
    workbench.question_box workbench.draft_page workbench
    launcher
    commands.terminal commands.alternatives commands.calibrate commands.report
    commands.distances commands.compare commands.coverage commands.draft commands.review
    commands.mock commands.workbench commands
    cli __main__
""".split()

TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "LICENSE",
    "ladderfit",
    "notebooks",
    "tests",
    "sample_data",
}
LONGEST_FILE = 400
PLOTTING = ("plots", "workbench.canvas")
WIDGETS = ("workbench",)
BLIND = ("mock",)  # must not know how a fit is made
FIT = ("relations", "peak_terms", "kernels", "posterior")


def belongs(module: str, places: tuple[str, ...]) -> bool:
    return any(module == place or module.startswith(f"{place}.") for place in places)


def module_name(relative: Path) -> str:
    """`posterior/joint.py` is posterior.joint, `posterior/__init__.py` is posterior."""
    parts = [*relative.parent.parts, relative.stem]
    return ".".join(part for part in parts if part != "__init__")


def sources(package: Path) -> dict[str, str]:
    return {
        module_name(path.relative_to(package)): path.read_text(encoding="utf-8")
        for path in sorted(package.rglob("*.py"))
    }


def imported(tree: ast.AST, known: set[str]) -> list[tuple[int, str]]:
    """Line and full name of everything imported anywhere, each once; known modules resolved."""
    return list(dict.fromkeys(all_imported(tree, known)))


def all_imported(tree: ast.AST, known: set[str]) -> Iterator[tuple[int, str]]:
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = "." * node.level + (node.module or "")
            for alias in node.names:
                deeper = f"{base}.{alias.name}"
                resolved = deeper.removeprefix("ladderfit.") in known
                yield node.lineno, deeper if resolved else base


def import_faults(code: dict[str, str], order: list[str]) -> list[str]:
    """What breaks the rules of import, one line each."""
    faults = [
        f"{module}: has no place in the order" for module in code if module not in [*order, ""]
    ]
    place = {module: index for index, module in enumerate(order)}
    for module, text in code.items():
        for line, name in imported(ast.parse(text), set(order)):
            where = f"{module or 'ladderfit'}:{line} imports {name}"
            top = name.split(".")[0]
            if name.startswith("."):
                faults.append(f"{where}: relative")
            elif top in ("matplotlib", "corner") and not belongs(module, PLOTTING):
                faults.append(f"{where}: only in {', '.join(PLOTTING)}")
            elif top in ("ipywidgets", "ipympl", "anywidget") and not belongs(module, WIDGETS):
                faults.append(f"{where}: only in {', '.join(WIDGETS)}")
            elif top == "ladderfit":
                target = name.removeprefix("ladderfit").removeprefix(".")
                if target not in place:
                    faults.append(f"{where}: not a module")
                elif belongs(module, BLIND) and belongs(target, FIT):
                    faults.append(f"{where}: the simulator must not know the fit")
                elif module in place and place[target] >= place[module]:
                    faults.append(f"{where}: against the direction")
    return faults


def unsafe_calls(text: str) -> list[str]:
    """Ways to run code from data."""
    found = []
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.Import | ast.ImportFrom):
            names = [alias.name for alias in node.names] + [getattr(node, "module", None) or ""]
            risky = {"pickle", "cPickle", "dill", "cloudpickle", "joblib", "marshal", "shelve"}
            found += [
                f"line {node.lineno}: {name}" for name in names if name.split(".")[0] in risky
            ]
        elif isinstance(node, ast.Call):
            called = ast.unparse(node.func)
            pickled = any(
                word.arg == "allow_pickle"
                and not (isinstance(word.value, ast.Constant) and word.value.value is False)
                for word in node.keywords
            )
            if called in ("eval", "exec") or called.endswith((".eval", "yaml.load", "read_pickle")):
                found.append(f"line {node.lineno}: {called}")
            elif pickled:
                found.append(f"line {node.lineno}: allow_pickle")
    return found


@pytest.fixture(scope="module")
def code(repository: Path) -> dict[str, str]:
    return sources(repository / "ladderfit")


def test_one_direction_of_imports(code: dict[str, str]) -> None:
    faults = import_faults(code, ORDER)
    assert not faults, "\n".join(faults)


@pytest.mark.parametrize(
    ("module", "line", "complaint"),
    [
        ("errors", "from ladderfit.cli import main", "against the direction"),
        ("posterior.split", "from ladderfit.posterior import joint", "against the direction"),
        ("result", "def f():\n    import ladderfit.store", "against the direction"),
        ("inputs.tables", "from .errors import Problem", "relative"),
        ("ladder", "import matplotlib.pyplot as plt", "only in plots"),
        ("plots.theme", "import ipywidgets", "only in workbench"),
        ("mock.survey", "from ladderfit.relations import design", "must not know"),
        ("mock.survey", "from ladderfit.posterior import joint", "must not know"),
        ("surprise", "import numpy", "no place in the order"),
        ("cli", "from ladderfit.gone import thing", "not a module"),
    ],
)
def test_faulty_imports_are_found(module: str, line: str, complaint: str) -> None:
    """Negative controls."""
    (fault,) = import_faults({module: line}, ORDER)
    assert complaint in fault


def test_order_names_each_module_once() -> None:
    assert len(ORDER) == len(set(ORDER))


def test_no_code_from_data(code: dict[str, str]) -> None:
    faults = [f"{module}: {call}" for module, text in code.items() for call in unsafe_calls(text)]
    assert not faults, "\n".join(faults)


@pytest.mark.parametrize(
    "line",
    [
        "import pickle",
        "from pickle import loads",
        "eval('1')",
        "frame.eval('a + b')",
        "np.load(path, allow_pickle=True)",
        "yaml.load(text)",
        "pd.read_pickle(path)",
    ],
)
def test_code_from_data_is_found(line: str) -> None:
    """Negative controls."""
    assert unsafe_calls(line)
    assert not unsafe_calls("np.load(path, allow_pickle=False)")


def test_files_are_short(repository: Path) -> None:
    paths = [*(repository / "ladderfit").rglob("*.py"), *(repository / "tests").rglob("*.py")]
    lengths = {
        str(path.relative_to(repository)): len(path.read_text(encoding="utf-8").splitlines())
        for path in paths
    }
    long = {name: length for name, length in lengths.items() if length > LONGEST_FILE}
    assert not long, f"over {LONGEST_FILE} lines: {long}"


def test_top_level(repository: Path) -> None:
    listed = subprocess.run(
        ["git", "ls-files"], cwd=repository, capture_output=True, text=True, check=True
    ).stdout.splitlines()
    visible = {name.split("/")[0] for name in listed if not name.startswith(".")}
    assert visible <= TOP_LEVEL
    assert visible >= TOP_LEVEL - {"notebooks"}


def test_integration_runs_the_line_of_the_readme(repository: Path) -> None:
    readme = (repository / "README.md").read_text(encoding="utf-8").splitlines()
    script = (repository / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    (line,) = (text.strip() for text in readme if text.strip().endswith("bin/pytest"))
    assert line in script
    assert (repository / ".ci" / "run").stat().st_mode & 0o100


def test_the_package_is_light_until_used() -> None:
    probe = (
        "import sys, ladderfit; heavy = {'numpy', 'pandas', 'astropy', 'matplotlib'} & "
        "set(sys.modules); sys.exit(' '.join(sorted(heavy)) or 0)"
    )
    done = subprocess.run(
        [sys.executable, "-c", probe], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr


def test_public_names_exist() -> None:
    import ladderfit

    missing = [name for name in dir(ladderfit) if not hasattr(ladderfit, name)]
    assert not missing
    with pytest.raises(AttributeError, match="no attribute 'galaxy'"):
        _ = ladderfit.galaxy
