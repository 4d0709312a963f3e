"""What a reviewer would ask about a case: doubts, each with the line that would settle it."""

from fluxmesh.assess.review.doubt import Doubt, Review, Setting
from fluxmesh.assess.review.evidence import Evidence, NamedArray
from fluxmesh.assess.review.registry import review_of

__all__ = ["Doubt", "Evidence", "NamedArray", "Review", "Setting", "review_of"]
