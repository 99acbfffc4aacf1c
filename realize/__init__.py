"""Minimal realizations and hidden modes of linear time-invariant models, exact beside floating.

Every public name is loaded at first use, so that importing the package costs no more than
importing numpy.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

import numpy as _numpy  # noqa: F401  # its cost is paid here, at the import, and never later

if TYPE_CHECKING:
    from realize import exact, floating, multiprecision
    from realize.convert import as_realization, as_transfer_matrix
    from realize.dispatch import (
        cancel,
        companion,
        from_markov_parameters,
        kalman_parts,
        markov_parameters,
        minimal,
        staircase,
        transfer_matrix,
    )
    from realize.entries import Kind, Reading
    from realize.errors import (
        AlgebraicLoopError,
        AlgebraicLoopWarning,
        ArithmeticMismatchError,
        BudgetError,
        CertificateError,
        DisagreementError,
        EntryError,
        HiddenInstabilityWarning,
        ImproperError,
        InexactInputError,
        LimitError,
        ModelFileError,
        NotBuiltError,
        PrecisionError,
        RealizeError,
        RealizeWarning,
        SamplingPeriodError,
        ShapeError,
        ToleranceError,
        UnknownWordError,
        UnsupportedEntryError,
        VerificationError,
        ZeroDenominatorError,
    )
    from realize.examination.examine import examine
    from realize.examination.record import Examination
    from realize.model.connections import (
        assemble,
        block_diagonal,
        cascade,
        loop,
        sum_of,
    )
    from realize.model.files import load, save
    from realize.model.realization import Realization
    from realize.model.transfer import TransferMatrix
    from realize.nearness.distance import (
        Distance,
        distance_to_uncontrollability,
        distance_to_unobservability,
    )
    from realize.proof.certify import certify
    from realize.proof.compare import same_transfer
    from realize.proof.record import Certificate, Comparison, check
    from realize.results import (
        Cancellation,
        KalmanParts,
        Mode,
        Part,
        RankDecision,
        Reduction,
        Side,
        Staircase,
    )
    from realize.stability import Stability

__version__ = "0.1.0"

__all__ = [
    "AlgebraicLoopError",
    "AlgebraicLoopWarning",
    "ArithmeticMismatchError",
    "BudgetError",
    "Cancellation",
    "Certificate",
    "CertificateError",
    "Comparison",
    "DisagreementError",
    "Distance",
    "EntryError",
    "Examination",
    "HiddenInstabilityWarning",
    "ImproperError",
    "InexactInputError",
    "KalmanParts",
    "Kind",
    "LimitError",
    "Mode",
    "ModelFileError",
    "NotBuiltError",
    "Part",
    "PrecisionError",
    "RankDecision",
    "Reading",
    "Realization",
    "RealizeError",
    "RealizeWarning",
    "Reduction",
    "SamplingPeriodError",
    "ShapeError",
    "Side",
    "Stability",
    "Staircase",
    "ToleranceError",
    "TransferMatrix",
    "UnknownWordError",
    "UnsupportedEntryError",
    "VerificationError",
    "ZeroDenominatorError",
    "as_realization",
    "as_transfer_matrix",
    "assemble",
    "block_diagonal",
    "cancel",
    "cascade",
    "certify",
    "check",
    "companion",
    "distance_to_uncontrollability",
    "distance_to_unobservability",
    "exact",
    "examine",
    "floating",
    "from_markov_parameters",
    "kalman_parts",
    "load",
    "loop",
    "markov_parameters",
    "minimal",
    "multiprecision",
    "same_transfer",
    "save",
    "staircase",
    "sum_of",
    "transfer_matrix",
]

# Which module each name comes from; the type checkers read the imports above, a test compares.
_HOMES = {
    "realize.convert": ("as_realization", "as_transfer_matrix"),
    "realize.dispatch": (
        "cancel",
        "companion",
        "from_markov_parameters",
        "kalman_parts",
        "markov_parameters",
        "minimal",
        "staircase",
        "transfer_matrix",
    ),
    "realize.entries": ("Kind", "Reading"),
    "realize.errors": (
        "AlgebraicLoopError",
        "AlgebraicLoopWarning",
        "ArithmeticMismatchError",
        "BudgetError",
        "CertificateError",
        "DisagreementError",
        "EntryError",
        "HiddenInstabilityWarning",
        "ImproperError",
        "InexactInputError",
        "LimitError",
        "ModelFileError",
        "NotBuiltError",
        "PrecisionError",
        "RealizeError",
        "RealizeWarning",
        "SamplingPeriodError",
        "ShapeError",
        "ToleranceError",
        "UnknownWordError",
        "UnsupportedEntryError",
        "VerificationError",
        "ZeroDenominatorError",
    ),
    "realize.examination.examine": ("examine",),
    "realize.examination.record": ("Examination",),
    "realize.model.connections": (
        "assemble",
        "block_diagonal",
        "cascade",
        "loop",
        "sum_of",
    ),
    "realize.model.files": ("load", "save"),
    "realize.model.realization": ("Realization",),
    "realize.model.transfer": ("TransferMatrix",),
    "realize.proof.certify": ("certify",),
    "realize.proof.compare": ("same_transfer",),
    "realize.proof.record": ("Certificate", "Comparison", "check"),
    "realize.nearness.distance": (
        "Distance",
        "distance_to_uncontrollability",
        "distance_to_unobservability",
    ),
    "realize.results": (
        "Cancellation",
        "KalmanParts",
        "Mode",
        "Part",
        "RankDecision",
        "Reduction",
        "Side",
        "Staircase",
    ),
    "realize.stability": ("Stability",),
}
_HOME_OF = {name: module for module, names in _HOMES.items() for name in names}
_SUBMODULES = ("exact", "floating", "multiprecision")


def __getattr__(name: str) -> Any:
    if name in _HOME_OF:
        value = getattr(importlib.import_module(_HOME_OF[name]), name)
    elif name in _SUBMODULES:
        value = importlib.import_module(f"realize.{name}")
    else:
        raise AttributeError(f"module 'realize' has no attribute {name!r}")
    globals()[name] = value  # found without this function from now on
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
