"""All checks of the project, as continuous integration runs them: style, types, tests.

python scripts/check.py [ARGUMENTS OF PYTEST]
"""

from __future__ import annotations

import subprocess
import sys
import time
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
STEPS = {
    "style": ["ruff", "check"],
    "layout": ["ruff", "format", "--check"],
    "types": ["mypy"],
    "tests": ["pytest", "-n", "2", "--dist", "loadfile"],
}


def main(arguments: list[str]) -> int:
    """Run every step, also behind one that fails; 1 if any did."""
    failed = []
    for name, command in STEPS.items():
        begin = time.perf_counter()
        extra = arguments if name == "tests" else []
        status = subprocess.run([sys.executable, "-m", *command, *extra], cwd=ROOT, check=False).returncode
        print(
            f"{name}: {'failed' if status else 'passed'} in {time.perf_counter() - begin:.0f} s", flush=True
        )
        if status:
            failed.append(name)
    if failed:
        print(f"failed: {', '.join(failed)}")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
