"""Measured speed and robustness: `python -m tests.benchmarks --help`.

Every module named in `__main__.BENCHMARKS` measures one thing: `measure(quick)` returns plain figures that go
into a JSON file, `tables(measured)` words them as tables, and `plot(measured)`, where there is one, draws
them. Times are medians over rounds in which the contenders take turns in one process (`measuring.py`).
"""
