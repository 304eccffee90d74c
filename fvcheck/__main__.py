"""``python -m fvcheck`` and the ``fvcheck`` command."""

from __future__ import annotations

import gc
import os
import sys


def main() -> None:
    """Run the command line and leave with its exit status."""
    # Nearly all that a start makes is kept; looking through it again and again takes a tenth of it.
    gc.set_threshold(50_000, 20, 20)
    # It would look through all installed packages for plug-ins; a check file needs none.
    os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")
    from fvcheck.cli.app import run

    status = run(sys.argv[1:])
    # The interpreter would look through all objects once more before it ends; a fifth of a short run.
    gc.freeze()
    sys.exit(status)


if __name__ == "__main__":
    main()
