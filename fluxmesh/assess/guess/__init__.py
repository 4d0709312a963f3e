"""What an exported array probably is: from its name, the unit in its name, its shape and its values."""

from fluxmesh.assess.guess.arrays import ArrayGuess, best_guess, guess_arrays
from fluxmesh.assess.guess.names import name_words

__all__ = ["ArrayGuess", "best_guess", "guess_arrays", "name_words"]
