"""Benchmarks: accuracy against time, two things measured side by side in one run.

python -m tests.bench                 every row
python -m tests.bench engine scale    some groups
python -m tests.bench --json          for scripts
"""
