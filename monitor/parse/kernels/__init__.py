"""Compiled loops over bytes. Importing a module of this package loads the compiler: do it late.

The loops work on addresses, not on arrays, so that nothing has to be carried from one function to the next but
plain numbers. Whoever calls one from Python promises that its arrays live on, and that the text has SPARE
readable bytes behind the part to be read.
"""
