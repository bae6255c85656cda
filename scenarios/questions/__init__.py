"""The questions a scenario can ask, one module each."""
