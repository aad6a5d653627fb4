"""Cells -> typed columns with true addresses; the request grid -> models asked for. No zip parts, no fitting."""
