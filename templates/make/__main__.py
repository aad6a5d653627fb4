"""`python -m templates.make`."""

from pathlib import Path

from templates.make import make

for path in make(Path(__file__).resolve().parent.parent):
    print(path)
