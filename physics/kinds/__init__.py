"""The kinds of run: how each turns readings into measured and expected offsets, and when a station closes."""
