"""Measured ratios: speed, growth, size and tightness, each against an outside reference.

``python -m tests.benchmarks`` from a checkout prints one Markdown table; ``--quick`` takes below a minute,
``--only NAME`` measures one subject. Every ratio is formed within one run: the two sides take turns, each
side's figure is the median of its turns, and a turn is measured in processor time on one thread, so that
other work on the machine disturbs both sides alike. It needs the packages of the ``test`` extra.
"""
