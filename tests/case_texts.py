"""Texts of invented cases that several tests begin from."""

BETWEEN_PLATES = """\
[hot]
fluid = "reservoir"
inlet_temperature = "150 degC"
film_coefficient = "20000 W/(m^2 K)"
[cold]
fluid = "reservoir"
inlet_temperature = "50 degC"
film_coefficient = "20000 W/(m^2 K)"
[stack]
layers = 1
rows = 1
columns = 1
row_pitch = "40 mm"
column_pitch = "40 mm"
[module]
"""
