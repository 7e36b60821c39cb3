"""The same examples on every machine, so that a red run is a change's doing; tests/fuzz.py is what goes looking."""

from hypothesis import settings

settings.load_profile("ci")  # Hypothesis's own: derandomised, no deadline, prints what reproduces a failure
