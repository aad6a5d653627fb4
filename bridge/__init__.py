"""savefit: regression that lives inside people's own workbooks."""

__version__ = "0.1.0"
