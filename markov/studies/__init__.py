"""Studies: what is done with a model beyond solving it once.

Random work takes a seed, and the same seed gives the same numbers.  Times are hours, rates per hour, in floats.
"""
