"""Speed and memory as ratios, ours against theirs in one run: `python -m tests.benchmarks`."""
