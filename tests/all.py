"""Every check of this project, one after the other: style, types, layering, then the tests.

`python -m tests.all`; arguments go to pytest.
"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
TOOLS = Path(sys.executable).parent


def main() -> int:
    """Run all checks; the exit code is the first that failed."""
    checks = (
        [str(TOOLS / "ruff"), "check"],
        [str(TOOLS / "ruff"), "format", "--check"],
        [sys.executable, "-m", "mypy"],
        [str(TOOLS / "lint-imports"), "--no-cache"],
        [sys.executable, "-m", "pytest", "-n", "2", "--dist", "loadfile", *sys.argv[1:]],
    )
    for check in checks:
        print(
            "+", " ".join(Path(word).name if word in (sys.executable, check[0]) else word for word in check), flush=True
        )
        ended = subprocess.run(check, cwd=ROOT, check=False)
        if ended.returncode:
            return ended.returncode
    return 0


if __name__ == "__main__":
    sys.exit(main())
