"""Parts of the benchmarks: invented fields, baselines, and what is measured."""
