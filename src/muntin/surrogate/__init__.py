"""Surrogates of a response over coded factors; arrays only, no files and no wells."""
