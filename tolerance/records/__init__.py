"""The record of a run: written beside its workbook, read as data from anywhere, and the run re-made from it."""
