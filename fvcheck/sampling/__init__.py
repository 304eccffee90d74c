"""Operators: data at points or in cells → values and gradients anywhere."""
