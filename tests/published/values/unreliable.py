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
