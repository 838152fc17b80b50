"""What a tested line loses at other flows, and what it carries: a reduction in, a prediction out."""

from gradeline.prediction.predict import predict
from gradeline.prediction.tables import PREDICTION_TABLES, Prediction

__all__ = ["PREDICTION_TABLES", "Prediction", "predict"]
