"""The three laws of a tail: measured sizes, whole sizes, and measured sizes on the grid.

Each turns a sample into rows for its scan, tells its fit in our terms, and makes its replicates. They are
imported only when a fit is asked for, since they load the compiler.
"""
