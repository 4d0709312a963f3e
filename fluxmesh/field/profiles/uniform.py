"""The same speed everywhere."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fluxmesh.field.profiles.options import ProfileOptions
from fluxmesh.field.profiles.port import PortPatch

__all__ = ["uniform_shape"]


def uniform_shape(patch: PortPatch, options: ProfileOptions) -> NDArray[np.float64]:
    """Return a uniform profile.

    Parameters
    ----------
    patch : PortPatch
        The port; it may be bent.
    options : ProfileOptions
        None applies.

    Returns
    -------
    ndarray, shape (n_samples,), float64
        Ones.
    """
    return np.ones(patch.samples.face.size)
