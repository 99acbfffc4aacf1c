"""The paired examination: both paths on one model, side by side."""

from realize.examination.examine import examine
from realize.examination.nearest import Nearest
from realize.examination.record import Answer, Examination

__all__ = ["Answer", "Examination", "Nearest", "examine"]
