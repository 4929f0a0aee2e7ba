"""Worksheets: the language, its messages, and reading them into a `Question`."""

from derive.worksheet.reader import Sheet, read, survey, survey_bytes, understand

__all__ = ["Sheet", "read", "survey", "survey_bytes", "understand"]
