"""Layered films: from a scan's order table to a layer profile that can be reported.

task.py          what is to be made of a scan
scans.py         what is measured: positions, intensities, widths of lines
assignment.py    which order each line is (numbering.py weighs the evidence)
spacing.py       the period by least squares (positions.py is the model)
amplitudes.py    intensities to |F|, line by line
orders.py        amplitudes of the orders of one period, and the coefficient set they make
signs/           signs of a mirror-symmetric stack, ranked by what is known of its density
scaled_signs.py  the same where each sign set has a scale of its own
swelling/        signs of one layer from several periods or contrasts
trial/           trial stacks, refined
scale.py         the absolute scale from facts (facts.py)
widths.py        thickness and disorder from widths (line_widths.py, paracrystal.py)
damping.py       how fast intensities fall off
analysis.py      the chain
"""
