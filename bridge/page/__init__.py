"""What a sheet is made of (cells, formats, charts) as frozen values.

The one vocabulary that `bridge.sheets` (which lays sheets out) and `bridge.package`
(which turns them into parts) share. Knows neither zip parts nor statistics.
"""
