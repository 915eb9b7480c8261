"""What a stepped adjuster leaves, in the linear model of an alignment."""

import numpy as np


def step_moves(gains, stepped) -> np.ndarray:
    """M (S, S): degrees of the stepped angles per mm of the stepped settings, the other adjusters set again.

    gains G (A, A): degrees per mm; stepped: their numbers. M = inv((G⁻¹)_SS).
    """
    return np.linalg.inv(np.linalg.inv(gains)[np.ix_(stepped, stepped)])
