"""Compiled loops: arrays in, arrays out. Imports numpy and numba, nothing else (checked in CI)."""

from fvcheck.kernels.cache import settle

settle()
