"""Every threshold of the load checks. Sizes of prices are logs, of rates decimals a year, unless a name says MAD."""

from carrylab.data.calendar import Interval

# U1, R2: rates
HIGH_DECIMAL = 0.5  # a median rate above this is no decimal
LOW_PERCENT = 0.5  # rates that never pass this are no percentages
LOW_POINTS = 20.0  # and these no basis points
PRICES = (0.01, 1.5)  # prices of zero-coupon bonds outside this cannot be
IMPOSSIBLE_SHARE = 0.05  # of the prices; fewer may be a crisis
LOWEST_FORWARD = -0.05

# P1: covered parity
SLOPE_BAND, CLOSE_BAND = (0.85, 1.15), (0.95, 1.05)  # outside the first an error, outside the second a warning
LEAST_R2, CLOSE_R2 = 0.8, 0.95
SMALL_MISFIT, TINY_MISFIT = 0.005, 0.001  # residuals so small are a basis: at most a warning, or nothing
ENOUGH = 24  # periods for a slope or a correlation

# P2, P3, P4, S2: exchange rates
TRIANGLE = 0.001  # ten basis points on top of the half spreads
TRIANGLE_ERROR = 0.005  # up to here it may be another hour or rounding
WIDE = 10.0  # times the median spread
LARGE_PREMIUM = 1.0  # |ln F/S| a year
PEG_SD, PEG_DIFFERENTIAL = 0.0104, 0.01  # yearly sd of changes (.3% a month), differential

# D2, D3: holes and stale values
YEAR: dict[Interval, int] = {"day": 252, "week": 52, "month": 12, "quarter": 4, "year": 1}  # periods
LONG_GAP: dict[Interval, int] = {"day": 252, "week": 52, "month": 12, "quarter": 4, "year": 2}  # then a warning
STALE: dict[Interval, int] = {"day": 5, "week": 4, "month": 3, "quarter": 3, "year": 3}  # unchanged in a row

# D4, D5: timing
MISALIGNED_DAYS = 5  # between the usual observation days of two series
LAST_DAYS, LAST_SHARE = 3, 0.9  # of observations in so many last business days of a period
AVERAGE_AUTOCORRELATION = 0.15  # Working (1960): changes of averages of 21 days have .2492
WORKING = 0.2492
ENOUGH_CHANGES = 36

# D6, D7, D8: jumps
EXTREME = 8.0  # MAD
ALONE = 30.0  # MAD, out and back
QUIET = 3.0  # MAD within which peers count as quiet
NEIGHBOURS = 24  # periods on either side whose MAD a splice must pass too
SHIFT: dict[Interval, int] = {"day": 126, "week": 26, "month": 6, "quarter": 4, "year": 3}  # a splice lasts so long
NEW_MONEY_BAND = 0.02  # of k ln 10

# Q1: equity indices
YIELDS = (0.001, 0.20)  # trailing dividend yields outside this are a matter of units
ROUNDING = 1e-4  # of the price: indices are printed with so few digits
NEGATIVE_SHARE = 0.02  # of periods in which the implied dividend is below zero
