"""The parts of ``scripts/bench.py``: cases, the plain script, and a module per section."""
