"""Physics of two-phase stepping motors on chopper drivers: pure functions of floats or arrays.

SI units throughout; temperatures in °C. Nothing here imports the rest of the program.
"""
