"""Benchmarks: each module measures one thing and offers ``NAME``, ``HELP`` and ``run(threads)``."""
