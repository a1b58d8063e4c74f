"""Predicted counts: what the model expects in every field and bin, and how far the counts are from it."""

from starcount.predict.counts import as_prediction, draw_counts, predict_counts
from starcount.predict.prediction import OUTSIDE_SHARE, GroupPrediction, Prediction, Total

__all__ = [
    "OUTSIDE_SHARE",
    "GroupPrediction",
    "Prediction",
    "Total",
    "as_prediction",
    "draw_counts",
    "predict_counts",
]
