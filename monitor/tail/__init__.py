"""The mathematics of the tail: arrays in, frozen results out. No I/O, no clock, no hidden randomness.

The public face for users of the library is listed here; everything else is reached by module.
"""
