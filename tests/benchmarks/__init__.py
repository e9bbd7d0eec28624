"""Figures of speed, printed and never asserted: a machine that is busy is not a fault of the service.

The normal run takes a handful of loops, to see that the benchmarks themselves work. The figures are printed
by `BENCHMARK_LOOPS=1000 pytest -n 0 -s tests/benchmarks`, on a machine that does nothing else.

- `plain_script`: the thing to beat, python-control as an engineer would use it.
- `side_by_side`: both on the same loops in one run, in turn.
"""
