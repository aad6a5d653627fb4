"""`python -m demo_workbooks.make`."""

from pathlib import Path

from demo_workbooks.make import make

for path in make(Path(__file__).resolve().parent.parent):
    print(path)
