"""Truncated and winsorized normal and lognormal results: share admitted, mean, variance, response to a shift."""

NORMAL_SOURCE = "closed form of the truncated normal, reproduced by quadrature"
# limits at +-k SD | share accepted | variance ratio = attenuation | efficiency share*ratio
#                  | winsorized: slope | variance | efficiency slope^2/variance
SYMMETRIC = """
.5   | .382925 .080589 .0309 | .382925 .185128 .7921
1    | .682689 .291125 .1987 | .682689 .516059 .9031
1.96 | .950004 .758855 .7209 | .950004 .912980 .9885
2    | .954500 .773741 .7385 | .954500 .920537 .9897
3    | .997300 .973337 .9707 | .997300 .995007 .9996
4    | .999937 .998929 .9989 | .999937 .999879 1.0000
"""
# limits at +-k SD | at shifts .25 .5 1 2 3 SD the mean of accepted values
SHIFTED_SHIFTS = (0.25, 0.5, 1.0, 2.0, 3.0)
SHIFTED = """
2 | .19245 .37919 .71721 1.20233 1.47487
1 | .07255 .14373 .27721 .48995 .62937
3 | .24291 .48324 .94489 1.71240 2.20212
"""
SHIFTED_SHARE = "2 | .94772 .92698 .83999 .49997 .15865"
# low | high | mean | SD | share accepted | mean of accepted | variance of accepted ("-": not given)
ONE_SIDED = """
-1   | 2   | 0   | 1 | .818595 | .229637    | .519763
-inf | 1   | 0   | 1 | .841345 | -.287600   | .629686
135  | 145 | 140 | 3 | .904419 | 140.000000 | 5.700298
135  | 145 | 141 | 3 | -       | 140.627491 | -
135  | 145 | 143 | 3 | .743677 | 141.757315 | -
"""

LOGNORMAL_SOURCE = "closed form of the truncated lognormal, reproduced by quadrature"
# low | high | log-mean | log-SD | share | mean | variance | mean after +10 % | relative gain / .10
LOGNORMAL = """
0  | inf | 0   | .5 | 1       | 1.133148 | .364696 | 1.246463 | 1.0000
.5 | 2   | 0   | .5 | .834343 | 1.062933 | .138517 | 1.112418 | .4656
0  | 3   | 0   | 1  | .864031 | 1.029034 | .511986 | 1.079611 | .4915
.4 | 4   | ln 1.5 | .6 | .935146 | 1.626682 | .654787 | 1.733024 | .6537
"""
