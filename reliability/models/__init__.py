from reliability.models.kept_result import KeptResult

__all__ = ["KeptResult"]
