"""Benchmarks anyone can run: `python -m tests.bench.save_to_results`, `… .fit`, `… .idle`; `--help` says more.

Nothing here is a test: no time is asserted. Contenders run in turn within one run, each in a process of its own;
medians and ratios are printed.
"""
