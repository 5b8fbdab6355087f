"""Chance that an error exceeds TEa, by sigma (TEa over SD), and critical errors."""

SOURCE = "normal tail areas, independent computation"
SHIFTS = (0.0, 0.5, 1.0, 1.5, 2.0, 2.5, 3.0, 4.0)
# sigma | P(|error| > TEa) at each of SHIFTS (SD), no bias
BEYOND = """
2 | .045500 .073017 .160005 .308770 .500032 .691466 .841345 .977250
3 | .002700 .006442 .022782 .066811 .158656 .308538 .500000 .841345
4 | 6.33e-5 .000236 .001350 .006210 .022750 .066807 .158655 .500000
5 | 5.73e-7 3.4e-6 3.2e-5 .000233 .001350 .006210 .022750 .158655
6 | 1.97e-9 1.9e-8 2.87e-7 3.4e-6 3.17e-5 .000233 .001350 .022750
"""
# sigma | shift (SD) at which 5 % exceed TEa, both tails
CRITICAL_SHIFT = """
2   | .2038
2.5 | .8512
3   | 1.3551
3.5 | 1.8551
4   | 2.3551
6   | 4.3551
"""
# sigma | multiple of the SD at which 5 % exceed TEa
CRITICAL_MULTIPLE = """
3 | 1.5306
4 | 2.0408
6 | 3.0612
"""

LARGEST_SOURCE = "independent maximisation over the shift; model of Clin Chem 1997;43:2149-54 and 2016;62:959-65"
# rules | controls | sigma | worst shift (SD) | largest E(Nuf)/M | M at which the largest E(Nuf) is 1
LARGEST = """
1-3s                           | 2 | 4 | 2.1791 | .0476824  | 20.97
1-3s                           | 2 | 5 | 2.9430 | .00474942 | 210.55
1-3s                           | 4 | 4 | 1.770  | .017713   | 56.5
1-3s                           | 4 | 5 | 2.385  | .001143   | 875
1-3s 2-2s R-4s-opposite        | 2 | 4 | 1.930  | .026185   | 38.2
1-3s 2-2s R-4s-opposite        | 2 | 5 | 2.705  | .002106   | 475
1-3s 2-2s R-4s-opposite        | 2 | 6 | 3.305  | .000127   | 7846
1-3s 2-2s R-4s-opposite 4-1s   | 4 | 3 | .795   | .087902   | 11.4
1-3s 2-2s R-4s-opposite 4-1s   | 4 | 4 | 1.235  | .005557   | 180
1-3s 2-2s R-4s-opposite 4-1s   | 4 | 5 | 1.870  | .000223   | 4488
1-2.5s                         | 2 | 4.5 | -    | .004748   | -
"""
