"""EWMA with fixed limits: average run lengths, design limits, mid-stream delays, worked example, truncated values."""

TABLE_SOURCE = "Technometrics 1990;32:1-12, Table 3 (printed to three figures); figures here by integral equation"
WEIGHTS = (0.75, 0.50, 0.40, 0.25, 0.20, 0.10, 0.05, 0.03)
FACTORS = (3.087, 3.071, 3.054, 2.998, 2.962, 2.814, 2.615, 2.437)
# shift | average run length for each of WEIGHTS
TABLE = """
0    | 499.252 499.906 499.951 499.836 499.735 499.580 499.933 499.859
.25  | 320.544 254.785 223.728 170.296 150.216 106.322 84.006 76.726
.5   | 140.121 88.795 71.201 48.294 41.764 31.297 28.764 29.321
.75  | 62.462 35.913 28.418 20.115 18.150 15.848 16.374 17.634
1    | 30.590 17.477 14.263 11.136 10.542 10.331 11.383 12.598
1.5  | 9.898 6.526 5.875 5.464 5.501 6.084 7.113 8.068
2    | 4.538 3.628 3.522 3.614 3.743 4.362 5.225 5.987
2.5  | 2.684 2.497 2.539 2.745 2.880 3.442 4.168 4.797
3    | 1.875 1.926 2.019 2.258 2.381 2.868 3.496 4.029
3.5  | 1.458 1.577 1.687 1.954 2.073 2.468 3.041 3.490
4    | 1.225 1.336 1.440 1.727 1.864 2.193 2.695 3.109
5    | 1.035 1.073 1.119 1.321 1.476 1.939 2.159 2.553
"""
# weight | factor | shift | as printed: columns .50 and .03 READ, the others from memory
PRINTED = """
.50 | 3.071 | 500 255 88.8 35.9 17.5 6.53 3.63 2.50 1.93 1.58 1.34 1.07
.03 | 2.437 | 500 76.7 29.3 17.6 12.6 8.07 5.99 4.80 4.03 3.49 3.11 2.55
"""
SHEWHART = "499.609 373.892 201.445 103.057 54.554 17.883 7.254 3.602 2.155 1.517 1.222 1.029"
# Standard deviation of the run length: weight | factor | shift 0 | shift 1
DEVIATIONS_SOURCE = "independent integral equation"
DEVIATIONS = """
.1  | 2.814 | 491.36 4.75
.2  | 2.962 | 495.30 6.39
.05 | 2.615 | 485.63 4.23
"""

NARROW_SOURCE = (
    "A simple method for studying run-length distributions of EWMA charts, Technometrics 1987;29:401-407, Table 1"
)
# weight | at shifts 0, .25 ... 4, factor 2. Printed 3.95 at 1.25 (a misprint for 3.59) and 1.94 at 2 (computed 1.95).
NARROW = """
.5  | 26.45 20.12 11.89 7.29 4.91 3.59 2.80 2.29 1.95 1.70 1.51 1.37 1.26 1.18 1.12 1.08 1.05
.05 | 127.53 43.94 18.97 11.64 8.38 6.56 5.41 4.62 4.04 3.61 3.26 2.99 2.76 2.56 2.39 2.26 2.15
"""

ANCHORS_SOURCE = "anchors of high precision, printed and reproduced by integral equation"
# weight | factor | shift | average run length | where printed
ANCHORS = """
.25 | 3                  | 1 | 11.154267016 | a statistical manual of 1999
.75 | 2.581988897471611  | 0 | 104.0209 | Appl Statist 1986;35:151-158, Table 1 (104.0)
.5  | 3.4641016151377544 | 0 | 1951.600 | Appl Statist 1986;35:151-158, Table 1 (1952)
.05 | 3                  | 0 | 1379.35 | J Qual Technol 1999;31:75-86 (1379)
.03 | 3                  | 0 | 2062.74 | integral equation
.1  | 3                  | 0 | 842.15 | integral equation
.2  | 3                  | 0 | 559.87 | integral equation
.25 | 3                  | 0 | 502.90 | integral equation
.3  | 3                  | 0 | 465.55 | integral equation
.4  | 3                  | 0 | 421.16 | integral equation
.5  | 3                  | 0 | 397.46 | integral equation
.75 | 3                  | 0 | 374.50 | integral equation
"""

DESIGN_SOURCE = "independent root-finding on the integral equation"
DESIGN_WANTED = (370.4, 500.0, 1000.0, 2000.0, 5000.0, 10000.0)
# weight | factor that gives each of DESIGN_WANTED in control
DESIGN = """
.02  | 2.1354 2.2780 2.5854 2.8632 3.1920 3.4174
.03  | 2.3024 2.4371 2.7267 2.9889 3.3012 3.5167
.05  | 2.4901 2.6151 2.8838 3.1285 3.4225 3.6273
.10  | 2.7015 2.8143 3.0586 3.2834 3.5568 3.7491
.20  | 2.8593 2.9622 3.1866 3.3954 3.6521 3.8344
.25  | 2.8980 2.9981 3.2171 3.4216 3.6738 3.8533
.30  | 2.9250 3.0230 3.2380 3.4392 3.6881 3.8656
.50  | 2.9778 3.0711 3.2767 3.4708 3.7124 3.8858
1.0  | 3.0000 3.0902 3.2905 3.4808 3.7190 3.8906
"""

STEADY_SOURCE = "independent quasi-stationary start of the integral equation"
STEADY_SHIFTS = (0.0, 0.25, 0.5, 1.0, 1.5, 2.0, 3.0)
# weight | factor | delay after an onset in mid-stream, for each of STEADY_SHIFTS
STEADY = """
.1  | 2.814 | 491.84 104.26 30.57 10.12 5.99 4.31 2.85
.05 | 2.615 | 486.07 81.52 28.00 11.18 7.02 5.17 3.47
"""

HANDBOOK_SOURCE = "NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.4 (data from memory)"
HANDBOOK_DATA = "52.0 47.0 53.0 49.3 50.1 47.0 51.0 50.1 51.2 50.5 49.6 47.6 49.9 51.3 47.8 51.2 52.6 52.4 53.6 52.1"
HANDBOOK_EWMA = "50.60 49.52 50.56 50.18 50.16 49.21 49.75 49.85 50.26 50.33 50.11 49.36 49.52 50.05 49.38 49.92 50.73 51.23 51.94 51.99"

TRUNCATED_SOURCE = "independent collocation of the truncated chain, confirmed by simulation"
TRUNCATED_SHIFTS = (0.0, 0.25, 0.5, 1.0, 2.0)
# weight | factor | accepted/offered results until the alarm, truncated at 2 SD, for each of TRUNCATED_SHIFTS
TRUNCATED = """
.1  | 2.814 | 559.66/586.3 140.07/147.80 42.110/45.427 13.946/16.603 6.689/13.380
.05 | 2.615 | 513.8/538.3 104.20/109.95 35.951/38.783 14.585/17.363 7.755/15.510
"""
WINSORIZED_SOURCE = "independent simulation"
# weight | factor | results until the alarm, set to 2 SD, at shifts 0 .25 .5 1 | standard errors
WINSORIZED = ".1 | 2.814 | 548.63 111.65 32.409 10.906 | .34 .06 .012 .002"
