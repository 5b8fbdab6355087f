"""Control rules: rejection probabilities within one event, average run lengths, power at the critical error."""

SHIFTS = (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0)

POWER_SOURCE = (
    "independent enumeration of zones, 4e7 simulated runs; rules as in Clin Chem 1977;23:1857-67 and 1981;27:493-501"
)
# rules | controls in the event | rejection probability at each of SHIFTS ("-": not given)
POWER = """
1-2s                                | 2 | .08893 .14070 .29441 .52220 .75003 .90481 .97483 .99948
1-2s                                | 3 | .13038 .20345 .40731 .66973 .87502 .97063 .99601 .99999
1-2s                                | 4 | .16995 .26161 .50214 .77171 .93752 .99094 .99937 1.0000
1-2.5s                              | 2 | .02468 .04762 .12959 .29219 .52188 .75000 .90480 .99554
1-3s                                | 1 | .00270 .00644 .02278 .06681 .15866 .30854 .50000 .84134
1-3s                                | 2 | .00539 .01284 .04504 .12916 .29214 .52188 .75000 .97483
1-3s                                | 3 | .00808 .01920 .06680 .18734 .40445 .66940 .87500 .99601
1-3s                                | 4 | .01076 .02552 .08806 .24163 .49893 .77140 .93750 .99937
2-2s                                | 2 | .00104 .00450 .02517 .09520 .25000 .47812 .70786 .95502
2-2s                                | 3 | .00205 .00871 .04635 .16102 .37500 .62564 .82017 .97674
2of3-2s                             | 3 | .00306 .01291 .06753 .22684 .50000 .77316 .93247 .99847
2-2s                                | 4 | .00306 .01291 .06753 .22684 .50000 .77316 .93247 .99847
R-4s-opposite                       | 2 | .00104 .00083 .00043 - - - - -
R-4s-opposite                       | 3 | .00303 .00240 .00118 - - - - -
R-4s-opposite                       | 4 | .00593 .00462 .00218 - - - - -
R-4s                                | 2 | .004678 .004678 .004678 .004678 .004678 .004678 .004678 .004678
R-4s                                | 3 | .012988 .012988 .012988 .012988 .012988 .012988 .012988 .012988
R-4s                                | 4 | .024183 .024183 .024183 .024183 .024183 .024183 .024183 .024183
4-1s                                | 4 | .00127 .00908 .06250 .22860 .50107 .75838 .91206 .99461
1-3s 2-2s R-4s-opposite             | 2 | .00722 .01728 .06387 .18770 .40868 .66851 .86652 .99330
1-3s 2-2s R-4s                      | 2 | .00968 .01943 .06530 .18837 .40888 .66856 .86652 .99330
1-3s 2of3-2s R-4s-opposite 3-1s     | 3 | .02079 .05686 .20413 .48539 .77811 .94253 .99165 .99997
1-3s 2-2s R-4s-opposite 4-1s        | 4 | .01973 .04743 .17937 .46980 .78809 .95483 .99534 1.0000
"""

# The range reading with four controls was obtained by simulation only: shift, printed value, its standard error.
RANGE_FOUR_SOURCE = "4e7 simulated runs (independent)"
RANGE_FOUR = ((0.0, ".0326", 0.00003), (1.0, ".1857", 0.0001), (2.0, ".7887", 0.0001), (3.0, ".9954", 0.0001))

# rules | controls | rejection probability with the SD x 1.5, 2, 3 and no shift
IMPRECISION = """
1-3s                                | 2 | .0889 .2494 .5339
1-3s                                | 4 | .1700 .4366 .7828
1-3s 2-2s R-4s-opposite             | 2 | .1077 .2831 .5692
1-3s 2-2s R-4s-opposite 4-1s        | 4 | .2395 .5300 .8382
"""

TWO_DIGITS_SOURCE = "Clin Chem 1977;23:1857-67 and 1979;25:863-9, two-digit figures from memory"
# False rejection as printed; the multi-rule figures are those of the range reading of R-4s.
TWO_DIGITS = """
1-2s                                | 2 | .09
1-3s                                | 4 | .01
1-3s 2-2s R-4s                      | 2 | .01
1-3s 2-2s R-4s 4-1s                 | 4 | .03
"""

RUN_LENGTH_SOURCE = (
    "Exact results for Shewhart control charts with supplementary runs rules, Technometrics 1987;29:393-9"
)
RUN_RULES = {"1": "1-3s", "2": "2of3-2s", "3": "4of5-1s", "4": "8x"}
RUN_COLUMNS = ("1", "1+2", "1+3", "1+4", "1+2+3", "1+2+4", "1+3+4", "1+2+3+4")
# shift | average run length for each of RUN_COLUMNS
RUN_LENGTHS = """
0   | 370.40 225.44 166.05 152.73 132.89 122.05 105.78 91.75
.2  | 308.43 177.56 120.70 110.52 97.86 89.14 76.01 66.80
.4  | 200.08 104.46 63.88 59.76 52.93 48.71 40.95 36.61
.6  | 119.67 57.92 33.99 33.64 28.70 27.49 23.16 20.91
.8  | 71.55 33.12 19.78 21.07 16.93 17.14 14.62 13.25
1.0 | 43.89 20.01 12.66 14.58 10.95 11.73 10.19 9.22
1.2 | 27.82 12.81 8.84 10.90 7.68 8.61 7.66 6.89
1.4 | 18.25 8.69 6.62 8.60 5.75 6.63 6.08 5.42
1.6 | 12.38 6.21 5.24 7.03 4.54 5.27 5.01 4.41
1.8 | 8.69 4.66 4.33 5.85 3.73 4.27 4.24 3.68
2.0 | 6.30 3.65 3.68 4.89 3.14 3.50 3.65 3.13
2.4 | 3.65 2.48 2.78 3.38 2.35 2.47 2.77 2.35
3.0 | 2.00 1.68 1.89 1.99 1.67 1.68 1.89 1.67
"""

CLINICAL_SOURCE = "independent Markov chain over zones"
CLINICAL_SHIFTS = (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0)
# rules | average run length of a single control at each of CLINICAL_SHIFTS
CLINICAL_RUN_LENGTHS = """
1-2s                | 21.978 13.695 6.250 3.239 2.000 1.446 1.189
2-2s                | 988.034 236.853 46.027 13.746 6.000 3.538 2.601
10x                 | 1023 126.392 29.162 14.917 11.374 10.350 10.075
1-3s 2-2s           | 278.045 100.603 25.612 8.782 4.073 2.412 1.704
1-3s 2-2s 4-1s      | 218.578 65.828 16.184 6.310 3.454 2.288 1.688
1-3s 2-2s 4-1s 10x  | 182.998 47.648 13.021 5.933 3.434 2.288 1.688
"""

CRITICAL_SOURCE = "independent computation at the critical systematic error, sigma - 1.65"
CRITICAL_SIGMAS = (3.0, 3.5, 4.0, 4.5, 5.0, 5.5, 6.0)
# rules | controls | rejection probability at a shift of sigma - 1.65, for each of CRITICAL_SIGMAS
CRITICAL_POWER = """
1-3s                                | 2 | .0965 .2345 .4492 .6868 .8681 .9609 .9922
1-3s 2-2s R-4s-opposite             | 2 | .1401 .3340 .5928 .8178 .9435 .9883 .9984
1-3s                                | 4 | .1837 .4140 .6966 .9019 .9826 .9985 .9999
1-3s 2-2s R-4s-opposite 4-1s        | 4 | .3695 .7036 .9228 .9900 .9994 1 1
"""


def lines(table: str) -> list[tuple[str, ...]]:
    """Cells of each line of a table, stripped."""
    return [tuple(cell.strip() for cell in line.split("|")) for line in table.strip().splitlines()]
