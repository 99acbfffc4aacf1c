"""The forms, each written once over a path (see `realize.arithmetic.path`)."""

from realize.forms.cancel import cancel
from realize.forms.companion import companion, realize_transfer
from realize.forms.kalman import kalman_parts
from realize.forms.markov import markov_parameters, read_parameters, realize_parameters
from realize.forms.minimal import minimal, reduce
from realize.forms.staircase import staircase
from realize.forms.transfer import transfer_matrix

__all__ = [
    "cancel",
    "companion",
    "kalman_parts",
    "markov_parameters",
    "minimal",
    "read_parameters",
    "realize_parameters",
    "realize_transfer",
    "reduce",
    "staircase",
    "transfer_matrix",
]
