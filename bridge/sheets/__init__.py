"""Laying out each of our sheets from the results: values, live formulas, formats, charts, words."""
