"""A forecast as JSON values.

Conventions: the fields schema, predictions, fingering, register, frequency_hz, uncertainty_cents, note,
cents, basis, likely_to_speak and measured_hz are a contract; others may be added, none renamed. Frequencies
are rounded to 0.0001 Hz, cents to 0.001, uncertainties to three digits. The JSON Schema is forecast-1 in
`fluteprobe/schema/`.
"""

from dataclasses import asdict
from typing import Any

from fluteprobe.flute.sensitivity import CHANGE_MM, Measure, Sensitivity
from fluteprobe.forecast.values import Disagreement, FitWords, Forecast, Prediction
from fluteprobe.version import __version__

FORECAST_SCHEMA = "fluteprobe/forecast/1"

CAUTIONS = (
    "Estimates from a fitted tube, in a model's words: the flute itself decides.",
    "Removed wood does not come back: work in small steps, let the flute cool, and measure again after each.",
    "Dust of some woods is harmful: wear a mask and eye protection, use extraction, and follow local codes.",
)


def forecast_json(forecast: Forecast) -> dict[str, Any]:
    """Return a forecast as JSON values by the schema forecast-1."""
    return {
        "schema": FORECAST_SCHEMA,
        "version": __version__,
        "flute": {"name": forecast.flute.name, "holes": forecast.flute.holes},
        "a4_hz": forecast.sitting.a4_hz,
        "air_temperature_c": forecast.sitting.air_temperature_c,
        "reason": forecast.reason,
        "predictions": [_prediction_json(each) for each in forecast.predictions],
        "fit": None if forecast.fit is None else _fit_json(forecast.fit),
        "change_mm": CHANGE_MM,
        "sensitivities": [_sensitivity_json(each) for each in forecast.sensitivities],
        "disagreements": [_disagreement_json(each) for each in forecast.disagreements],
        "cautions": list(CAUTIONS) if forecast.fit is not None else [],
    }


def _prediction_json(prediction: Prediction) -> dict[str, Any]:
    measured_hz = prediction.measured_hz
    return {
        "fingering": str(prediction.fingering),
        "register": prediction.register,
        "frequency_hz": round(prediction.frequency_hz, 4),
        "uncertainty_cents": _three_digits(prediction.uncertainty_cents),
        "note": prediction.note,
        "cents": round(prediction.cents, 3) + 0.0,
        "basis": prediction.basis,
        "likely_to_speak": round(prediction.likely_to_speak, 3),
        "tried": prediction.tried,
        "measured_hz": None if measured_hz is None else round(measured_hz, 4),
        "fills": prediction.fills,
        "rank": prediction.rank,
    }


def _fit_json(fit: FitWords) -> dict[str, Any]:
    words = {
        "misfit_cents": round(fit.misfit_cents, 3),
        "tones": fit.tones,
        "breath_resonances": fit.breath_resonances,
    }
    return words | {key: _rounded(**value) for key, value in asdict(fit.tube).items()}


def _sensitivity_json(sensitivity: Sensitivity) -> dict[str, Any]:
    return {
        "hole": sensitivity.hole,
        "fingering": str(sensitivity.fingering),
        "register": sensitivity.register,
        "wider_cents": _measure_json(sensitivity.wider_cents),
        "lower_cents": _measure_json(sensitivity.lower_cents),
    }


def _disagreement_json(disagreement: Disagreement) -> dict[str, Any]:
    return {
        "take": disagreement.take,
        "fingering": str(disagreement.fingering),
        "register": disagreement.register,
        "deviation_cents": round(disagreement.deviation_cents, 3) + 0.0,
        "surprise": _three_digits(disagreement.surprise),
    }


def _measure_json(measure: Measure) -> dict[str, float]:
    return _rounded(measure.value, measure.uncertainty)


def _rounded(value: float, uncertainty: float) -> dict[str, float]:
    return {"value": round(value, 4) + 0.0, "uncertainty": _three_digits(uncertainty)}


def _three_digits(value: float) -> float:
    return float(f"{value:.3g}") + 0.0
