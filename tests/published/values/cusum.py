"""CUSUM: average run lengths of the two-sided scheme on normal values, and the handbook's worked example."""

SHIFTS = (0.0, 0.25, 0.5, 0.75, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0, 5.0)

READ_SOURCE = "Technometrics 1982;24:199-205, Table 1 (READ as quoted in the manual page xcusum.arl of the package spc)"
MEM_SOURCE = "Technometrics 1982;24:199-205, Table 1 (MEM)"
REPRO_SOURCE = "integral equation with an atom at 0, 120 nodes (REPRO)"

# decision interval, head start, source of the printed figures | printed | integral equation, at each of SHIFTS; k = .5, two-sided
TWO_SIDED = (
    (4.0, 0.0, READ_SOURCE, "168 74.2 26.6 13.3 8.38 4.75 3.34 2.62 2.19 1.71 1.31",
     "167.684 74.224 26.630 13.285 8.383 4.747 3.343 2.620 2.194 1.708 1.309"),
    (4.0, 2.0, READ_SOURCE, "149 62.7 20.1 8.97 5.29 2.86 2.01 1.59 1.32 1.07 1.01",
     "148.696 62.698 20.064 8.968 5.287 2.862 2.014 1.586 1.325 1.067 1.006"),
    (5.0, 0.0, MEM_SOURCE, "465 139 38.0 17.0 10.4 5.75 4.01 3.11 2.57 2.01 1.69",
     "465.444 139.494 37.996 17.048 10.376 5.747 4.009 3.114 2.573 2.013 1.694"),
    (5.0, 2.5, MEM_SOURCE, "430 122 28.7 11.2 6.35 3.37 2.36 1.86 1.54 1.16 1.02",
     "430.391 121.688 28.666 11.236 6.347 3.372 2.362 1.856 1.540 1.159 1.023"),
)  # fmt: skip

# decision interval | printed in brackets at shift 0 (MEM) | integral equation at each of SHIFTS; k = .5, one-sided
ONE_SIDED = (
    (4.0, "335.368 77.079 26.679 13.287 8.383 4.747 3.343 2.620 2.194 1.708 1.309"),
    (5.0, "930.887 141.688 38.010 17.049 10.376 5.747 4.009 3.114 2.573 2.013 1.694"),
)

# k, h, shift, source | printed | integral equation; one-sided
ONE_SIDED_ANCHORS = (
    (0.5, 3.0, -0.5, "Technometrics 1986;28:61-67 (READ)", "1963", 1962.795),
    (0.5, 3.0, 0.0, "Biometrika 1972;59:539-548 (READ)", "117.59", 117.5957),
    (0.5, 3.0, 0.5, "Technometrics 1986;28:61-67 (READ)", "17.35", 17.3505),
    (0.5, 3.0, 1.5, "Technometrics 1986;28:61-67 (READ)", "3.75", 3.7491),
    (0.0, 10.0, -0.25, "J Qual Technol 1986;18:189-193 (READ)", "2071.51", 2071.57),
    (0.0, 10.0, -0.125, "J Qual Technol 1986;18:189-193 (READ)", "400.28", 400.28),
    (0.0, 10.0, 0.0, "J Qual Technol 1986;18:189-193 (READ)", "124.66", 124.66),
    (0.0, 10.0, 0.125, "J Qual Technol 1986;18:189-193 (READ)", "59.30", 59.30),
    (0.0, 10.0, 0.25, "J Qual Technol 1986;18:189-193 (READ)", "36.71", 36.71),
    (0.0, 10.0, 0.5, "J Qual Technol 1986;18:189-193 (READ)", "20.37", 20.37),
    (0.0, 10.0, 0.75, "J Qual Technol 1986;18:189-193 (READ)", "14.06", 14.06),
    (0.0, 10.0, 1.0, "J Qual Technol 1986;18:189-193 (READ)", "10.75", 10.75),
)

# ARL in control | h at k = .5 | h at k = .25; two-sided (REPRO, root of the integral equation)
DESIGN = (
    (370.4, 4.7749, 8.0103),
    (500.0, 5.0707, 8.5851),
    (1000.0, 5.7574, 9.9312),
    (2000.0, 6.4469, 11.2945),
    (5000.0, 7.3608, 13.1113),
)

HANDBOOK_SOURCE = "NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.3 (data and figures MEM, recursion REPRO)"
HANDBOOK_MEANS = (
    324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600,
    324.625, 325.150, 328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350,
)  # fmt: skip
HANDBOOK_UPPER_FROM_13 = (3.0075, 4.9400, 7.4475, 10.630, 11.9875, 14.4450, 16.0025, 19.0350)
