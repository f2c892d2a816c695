"""What people see: words, tables, charts and frames of the screen, made from stored facts.

Everything here is pure: it takes facts, a width, a height and the moment `now`, and gives back strings or
styled lines. Nothing prints, nothing reads a clock or a file; the commands do that.
"""
