"""The paired examination: both paths on one model, side by side."""

from realize.examination.examine import Answer, Examination, Nearest, examine

__all__ = ["Answer", "Examination", "Nearest", "examine"]
