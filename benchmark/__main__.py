"""`python -m steelyard.benchmark`: the same as the console command `steelyard`."""

from steelyard.benchmark.cli import main

if __name__ == "__main__":
    raise SystemExit(main())
