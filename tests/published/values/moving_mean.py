"""Moving mean of N values with limits at +-L/sqrt(N): results from an onset in mid-stream to the alarm."""

EXACT_SOURCE = "independent collocation of the integral equation, N = 2"
EXACT_SHIFTS = (0.0, 0.5, 1.0, 2.0, 3.0)
# L | average run length for each of EXACT_SHIFTS
EXACT = """
3   | 392.96369 103.34017 22.64369 3.75852 1.95984
2.5 | 88.85784 32.76092 9.98014 2.64938 1.69576
"""

SIMULATED_SOURCE = "independent simulation of a million runs"
SIMULATED_SHIFTS = (0.0, 0.25, 0.5, 1.0, 2.0)
# N | average run length for each of SIMULATED_SHIFTS, L = 3 | their standard errors
SIMULATED = """
3  | 433.4 229.83 83.39 16.775 3.506  | .6 .23 .08 .015 .002
10 | 766.2 202.88 50.04 11.461 5.216  | 1.2 .20 .05 .007 .002
50 | 2521 159.47 43.61 21.296 11.076  | 6 .22 .03 .011 .006
"""
