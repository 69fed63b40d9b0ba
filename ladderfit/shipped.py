"""Where the sample and the notebooks lie: inside a wheel, or beside the package in a checkout."""

from __future__ import annotations

from pathlib import Path

from ladderfit.errors import LadderfitError

_PACKAGE = Path(__file__).resolve().parent


def shipped(folder: str) -> Path:
    """The folder of that name which comes with the package.

    Parameters
    ----------
    folder : str
        ``sample_data`` or ``notebooks``.

    Returns
    -------
    Path
        An existing folder; treat it as read-only.

    Raises
    ------
    LadderfitError
        If the installation lacks the folder.
    """
    candidates = (_PACKAGE / "_shipped" / folder, _PACKAGE.parent / folder)
    for candidate in candidates:
        if candidate.is_dir():
            return candidate
    raise LadderfitError(
        f"the folder {folder} is missing from this installation; "
        f"looked in {' and '.join(str(candidate) for candidate in candidates)}; "
        "install ladderfit again"
    )


def sample_ladder() -> Path:
    """The ladder file of the sample.

    Raises
    ------
    LadderfitError
        If the installation lacks it.
    """
    return shipped("sample_data") / "sample.toml"
