"""Compiled loops of the tail engine. Importing the package compiles nothing and does not load the compiler."""
