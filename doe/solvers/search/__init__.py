"""Exact search of discrete levels under a mask rule, compiled by numba.

A state of a few chains is moved on by blocks of trials. A block draws from a random stream of its
own and begins with exactly summed amplitudes, so that a search resumed between blocks gives the
same bits as one that was never stopped. Array arguments of compiled functions bear no shapes in
their signatures: the test suite's shape checker cannot wrap compiled code.
"""
