"""Benchmarks, run by hand: `python -m tests.bench`.

Seconds differ between machines and hours, so every figure comes with a reference that was measured
in the same run, one after the other in turns, and what counts is the ratio.
"""
