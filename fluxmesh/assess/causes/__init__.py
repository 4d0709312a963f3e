"""What would explain a balance that does not close."""

from fluxmesh.assess.causes.facts import Facts, Source, facts_of, plain_facts
from fluxmesh.assess.causes.ranking import CausesFound, FoundCause, find_causes

__all__ = ["CausesFound", "Facts", "FoundCause", "Source", "facts_of", "find_causes", "plain_facts"]
