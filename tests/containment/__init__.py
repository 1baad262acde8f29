"""Randomised containment: every reported value ± its certificate contains the exact value, in balls, on random cases.

``python -m tests.containment --cases 2000 --seed 1`` from a checkout runs it in full; `test_flat_containment.py` runs a small, fixed
part of it. `cases` draws a medium, moves and a tolerance; `check` plans, and compares with python-flint balls. It needs the packages
of the ``test`` extra.
"""
