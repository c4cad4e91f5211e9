"""Layered films: from a scan's order table to a layer profile that can be reported.

scans.py       what is measured: positions, intensities, widths of lines
orders.py      what it becomes: amplitudes of the orders of one period
"""
