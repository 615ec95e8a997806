"""The checker that the test suite puts on every function with array shapes in its signature."""

from beartype import BeartypeConf, beartype

# A whole number serves where a float is due, as in Python's own rules.
checker = beartype(conf=BeartypeConf(is_pep484_tower=True))
