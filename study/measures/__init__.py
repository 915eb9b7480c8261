"""Measures of a suspension: pure functions of poses and twists. `KEYS` lists them all."""

from study.measures import anti, centres, steering, wheel  # noqa: F401  (they register themselves)
from study.measures.registry import KEYS, MeasureInfo
from study.measures.view import AxleView, View

__all__ = ["KEYS", "AxleView", "MeasureInfo", "View"]
