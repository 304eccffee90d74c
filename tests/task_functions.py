"""What the tests of tasks run in other processes."""

import os
import signal
import time
from pathlib import Path

from fvcheck.errors import FieldError


def square(number):
    return number * number


def refuse_odd(number):
    if number % 2:
        raise FieldError(f"{number} is odd", where="here", mend="Take another.")
    return number


def fail(number):
    raise ZeroDivisionError(f"by {number}")


def noisy(number):
    print("noise on standard output")
    return number


def die_once(path):
    """Kill the own process the first time that it is asked for a path."""
    mark = Path(path)
    if not mark.exists():
        mark.write_text(str(os.getpid()))
        os.kill(os.getpid(), signal.SIGKILL)
    return int(mark.read_text()) != os.getpid()


def die(number):
    if number == 1:
        os.kill(os.getpid(), signal.SIGKILL)
    return number


def sleep_at_one(number):
    if number == 1:
        time.sleep(600)
    return number
