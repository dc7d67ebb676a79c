"""Methods with their sources: which of them a report names depends on the words its findings use."""

from __future__ import annotations

from dataclasses import dataclass

import pandas as pd


@dataclass(frozen=True, slots=True)
class Method:
    """A method: a word, or a column, that findings use where it was at work (none: always); what it is; its source."""

    word: str
    what: str
    source: str


METHODS: tuple[Method, ...] = (
    Method(
        "",
        "Every outcome is regressed on the spread, on one shared sample. Weighted slopes add up to one by an "
        "accounting identity, which is proved on the data before anything is estimated.",
        "Fama and Bliss (1987), American Economic Review 77, 680-692; Campbell and Shiller (1988), Review of Financial "
        "Studies 1, 195-228.",
    ),
    Method(
        "forward-spot",
        "Forward-spot spread of bonds: excess return or rate rise.",
        "Fama and Bliss (1987), American Economic Review 77, 680-692.",
    ),
    Method(
        "yield-spread",
        "Yield spread of bonds: excess return or rise of the long rate.",
        "Campbell and Shiller (1991), Review of Economic Studies 58, 495-514.",
    ),
    Method(
        "uncovered-interest",
        "Rate differential of currencies: excess return or depreciation.",
        "Fama (1984), Journal of Monetary Economics 14, 319-338.",
    ),
    Method(
        "forward-discount",
        "Forward discount of currencies: return of the forward or depreciation.",
        "Fama (1984), Journal of Monetary Economics 14, 319-338.",
    ),
    Method(
        "dividend-price",
        "Dividend-price ratio: discounted returns, dividend growth and the future ratio in a log-linear identity.",
        "Campbell and Shiller (1988), Review of Financial Studies 1, 195-228; Cochrane (2008), Review of Financial "
        "Studies 21, 1533-1575.",
    ),
    Method(
        "carry",
        "Carry: the return if prices stay where they are, the same signal in every market.",
        "Koijen, Moskowitz, Pedersen and Vrugt (2018), Journal of Financial Economics 127, 197-225.",
    ),
    Method(
        "Hodrick 1B",
        "One-period errors: the overlap moves from the outcome to the signal; valid where nothing is paid.",
        "Hodrick (1992), Review of Financial Studies 5, 357-386.",
    ),
    Method(
        "equal-weighted cosines",
        "Errors from equal-weighted cosines, with Student's t.",
        "Mueller (2007), Journal of Econometrics 141, 1331-1352; Lazarus, Lewis, Stock and Watson (2018), Journal of "
        "Business and Economic Statistics 36, 541-559.",
    ),
    Method(
        "IVX instrument",
        "An instrument less persistent than the signal, so that tests keep their size.",
        "Phillips and Magdalinos (2009), working paper; Kostakis, Magdalinos and Stamatogiannis (2015), Review of "
        "Financial Studies 28, 1506-1553.",
    ),
    Method(
        "Bartlett",
        "Bartlett kernel over the sums of each date, so that entities may move together.",
        "Newey and West (1987), Econometrica 55, 703-708; Driscoll and Kraay (1998), Review of Economics and "
        "Statistics 80, 549-560.",
    ),
    Method(
        "fixed-b",
        "Critical values for the bandwidth in use.",
        "Kiefer and Vogelsang (2005), Econometric Theory 21, 1130-1164.",
    ),
    Method(
        "rectangular",
        "Rectangular kernel over the overlap.",
        "Hansen and Hodrick (1980), Journal of Political Economy 88, 829-853.",
    ),
    Method(
        "clustered",
        "Errors clustered by entity, date or both.",
        "Cameron, Gelbach and Miller (2011), Journal of Business and Economic Statistics 29, 238-249; Thompson (2011), "
        "Journal of Financial Economics 99, 1-10.",
    ),
    Method(
        "heteroskedasticity",
        "Errors robust to unequal variance.",
        "White (1980), Econometrica 48, 817-838.",
    ),
    Method(
        "bias is",
        "Bias of a slope on a persistent signal whose shocks move with returns.",
        "Stambaugh (1999), Journal of Financial Economics 54, 375-421.",
    ),
    Method(
        "Amihud and Hurvich",
        "A regression augmented by the signal's shocks.",
        "Amihud and Hurvich (2004), Journal of Financial and Quantitative Analysis 39, 813-841.",
    ),
    Method(
        "jackknife",
        "Half-panel jackknife of the slope.",
        "Dhaene and Jochmans (2015), Review of Economic Studies 82, 991-1030.",
    ),
    Method(
        "stepdown",
        "p-values stepped down over all hypotheses of a market.",
        "Romano and Wolf (2005), Econometrica 73, 1237-1282.",
    ),
    Method(
        "inverting the linear restriction",
        "Interval of a ratio by inverting a linear restriction.",
        "Fieller (1954), Journal of the Royal Statistical Society B 16, 175-185.",
    ),
    Method(
        "sup-t",
        "One band that holds at all horizons at once.",
        "Montiel Olea and Plagborg-Moller (2019), Journal of Applied Econometrics 34, 1-17.",
    ),
    Method(
        "share of variance",
        "Static, dynamic and common parts of the slope.",
        "Hassan and Mano (2019), Quarterly Journal of Economics 134, 397-450, for currencies; here in every market.",
    ),
    Method(
        "surveys",
        "A survey splits what is paid into a required premium and a forecast error.",
        "Froot and Frankel (1989), Quarterly Journal of Economics 104, 139-161.",
    ),
    Method(
        "single index",
        "One combination of predictors for all maturities.",
        "Cochrane and Piazzesi (2005), American Economic Review 95, 138-160.",
    ),
    Method(
        "Clark-West",
        "Test of nested forecasts that allows for the noise of the larger model.",
        "Clark and West (2007), Journal of Econometrics 138, 291-311.",
    ),
    Method(
        "encompassing",
        "Weight of a forecast when two are combined.",
        "Harvey, Leybourne and Newbold (1998), Journal of Business and Economic Statistics 16, 254-259.",
    ),
    Method(
        "sign restricted",
        "Forecasts restricted to the sign that theory gives.",
        "Campbell and Thompson (2008), Review of Financial Studies 21, 1509-1531.",
    ),
    Method(
        "p_holm",
        "p-values adjusted for the number of tests.",
        "Holm (1979), Scandinavian Journal of Statistics 6, 65-70; Benjamini and Hochberg (1995), Journal of the Royal "
        "Statistical Society B 57, 289-300.",
    ),
)
WHERE = ("section", "parity", "term", "method", "note")


def methods_used(findings: pd.DataFrame) -> list[Method]:
    """The methods whose words stand in the findings, in the order of the list."""
    texts = {str(text) for column in WHERE for text in findings[column].unique()}
    texts |= {name for name in findings.columns if findings[name].notna().any()}
    return [method for method in METHODS if any(method.word in text for text in texts)]
