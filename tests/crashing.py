"""Cases that go wrong in their process; top-level functions, so that a fresh interpreter finds them."""

import os
import time

from fvcheck.gating.running import run_case


def die_at_bad(path, *options):
    """End the process without a word where the check file is called bad."""
    if "bad" in os.path.basename(path):
        os._exit(11)
    return run_case(path, *options)


def raise_at_bad(path, *options):
    """An error that no case should raise."""
    if "bad" in os.path.basename(path):
        raise KeyError("planted")
    return run_case(path, *options)


def hang_at_bad(path, *options):
    """Never come to an end where the check file is called bad."""
    if "bad" in os.path.basename(path):
        time.sleep(600)
    return run_case(path, *options)
