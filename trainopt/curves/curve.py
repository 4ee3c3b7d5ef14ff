"""A fitted or given resistance curve, and the same curve as one lot of feed sees it in the plant.

Loading l in L/m², resistance R in bar/LMH, demand in bar·h (model.md, sections 1 and 2).
"""
