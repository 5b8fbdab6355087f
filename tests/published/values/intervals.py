"""Exact intervals for counts and shares."""

# successes | trials | level | low | high | source
BINOMIAL = """
4   | 20  | .90 | .071354 | .401028  | NIST/SEMATECH e-Handbook 7.2.4.1 (example READ; printed .071354, .401029 MEM)
682 | 925 | .95 | .7076683 | .7654066 | reference manual of the R base library, binom.test example (output MEM)
0   | 10  | .95 | 0 | .308497 | independent beta quantiles
1   | 10  | .95 | .002529 | .445016 | independent beta quantiles
5   | 10  | .95 | .187086 | .812914 | independent beta quantiles
8   | 20  | .95 | .191190 | .639457 | independent beta quantiles
4   | 100 | .95 | .011004 | .099257 | independent beta quantiles
10  | 100 | .95 | .049005 | .176223 | independent beta quantiles
0   | 300 | .95 | 0 | .012221 | independent beta quantiles
"""
GARWOOD = "Fiducial limits for the Poisson distribution, Biometrika 1936;28:437-42 (upper limit for 0 READ)"
# count | low | high, level .95
POISSON = """
0   | 0       | 3.6889
1   | .0253   | 5.5716
2   | .2422   | 7.2247
3   | .6187   | 8.7673
4   | 1.0899  | 10.2416
5   | 1.6235  | 11.6683
10  | 4.7954  | 18.3904
20  | 12.2165 | 30.8884
30  | 20.2409 | 42.8269
50  | 37.1110 | 65.9188
100 | 81.3640 | 121.6268
"""
# events | base | rate | low | high, level .95 | source
RATES = """
137 | 24.19893 | 5.661407 | 4.753125 | 6.692709 | reference manual of the R base library, poisson.test example (call READ)
17  | 73059    | 2.327e-4 | 1.3555e-4 | 3.7256e-4 | alarms of a small laboratory, Biochem Med 2022;32:010705 (counts READ-ABS)
76  | 303871   | 2.501e-4 | 1.971e-4 | 3.130e-4 | alarms of 24 assays, Clin Chem Lab Med 2017 (counts READ-ABS)
"""
