"""The functions as an extension of LibreOffice Calc.

`extension.py` writes the .oxt from the catalogue, here. `component.py` is what LibreOffice's own
Python runs: it is copied into the .oxt and imported by nothing in this package.
"""
