"""A device of three films for commands that study it; each test adds its own study table."""

DEVICE = """
title = "three films, invented"
[wavelength]
values_nm = [500, 550, 600]
[materials.host]
n = 1.75
[[layers]]
name = "EML"
material = "host"
thickness_nm = 30
[[layers]]
name = "ETL"
material = "host"
thickness_nm = 40
[[layers]]
name = "CAT"
material = "al"
thickness_nm = 100
[[emitters]]
name = "green"
layer = "EML"
spectrum = { peak_nm = 550, fwhm_nm = 20 }
zone = { shape = "point", at_nm = 10, from = "bottom" }
quantum_yield = 0.9
"""
