"""The parts of `make_demo.py`: noise, erosion, layout, and the writers."""
