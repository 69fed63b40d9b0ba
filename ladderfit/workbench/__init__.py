"""The live ladder in JupyterLab."""

from ladderfit.workbench.screen import Workbench
from ladderfit.workbench.state import Session, save_ladder

__all__ = ["Session", "Workbench", "save_ladder"]
