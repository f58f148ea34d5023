"""Checks of every room, their slow twins, an independent simulator, and the benchmark."""
