"""A commented case proposed from what is found in a mesh file."""

from fluxmesh.starter.propose import Proposal, propose_case
from fluxmesh.starter.write import write_case

__all__ = ["Proposal", "propose_case", "write_case"]
