"""The doubt of every figure: what the mesh, sampling, rounding and the inputs contribute, and what dominates."""

from fluxmesh.assess.doubt.budget import Budget, Contribution, Share
from fluxmesh.assess.doubt.draws import Drawn
from fluxmesh.assess.doubt.figures import Figures, figures, with_uncertainties
from fluxmesh.assess.doubt.inputs import Input
from fluxmesh.assess.doubt.model import BalanceModel

__all__ = [
    "BalanceModel",
    "Budget",
    "Contribution",
    "Drawn",
    "Figures",
    "Input",
    "Share",
    "figures",
    "with_uncertainties",
]
