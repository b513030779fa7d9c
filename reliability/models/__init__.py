from reliability.models.kept_forecast import KeptForecast, KeptForecastsNeverChange
from reliability.models.kept_result import KeptResult
from reliability.models.replacement_cost import ReplacementCost

__all__ = ["KeptForecast", "KeptForecastsNeverChange", "KeptResult", "ReplacementCost"]
