"""run(study) -> Results: the straight line through every layer, and the only module that knows them all."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from carrylab.audit import Audit
from carrylab.audit import audit as audit_samples
from carrylab.data.asof import as_of
from carrylab.data.calendar import Tenor, parse_tenor
from carrylab.data.checks import Check, check_market
from carrylab.data.panel import curves
from carrylab.data.read import MarketData, Table, read_market
from carrylab.data.states import read_labels
from carrylab.data.units import to_decimal
from carrylab.errors import DataError, SampleError, StudyError
from carrylab.evidence import asked
from carrylab.evidence.accounts import check_rows, identity_row, ledger_rows, regression_ledger_rows
from carrylab.evidence.across import across_rows
from carrylab.evidence.case import Case, Curve, Expected, Labelled, Rebuild, Rebuilt
from carrylab.evidence.curve import knots
from carrylab.evidence.drawn import DrawnRows, drawn_rows
from carrylab.evidence.drawn_curves import curve_rows
from carrylab.evidence.joint import group_rows, study_joint_rows
from carrylab.evidence.latest import latest_rows
from carrylab.evidence.many import adjust
from carrylab.evidence.others import other_rows
from carrylab.evidence.rules import require_found, rule_labels
from carrylab.evidence.setting import Fit, Row, errors_of
from carrylab.evidence.shares import share_rows
from carrylab.evidence.summary import summary_rows
from carrylab.findings import to_frame
from carrylab.markets import MARKETS
from carrylab.markets.columns import predictor
from carrylab.markets.curves import YieldCurves
from carrylab.markets.parity import Entity, Leg, Parity, identity
from carrylab.markets.proof import identity_check
from carrylab.options import Inference, Market, Questions, State, Study
from carrylab.regression.covariance import ErrorOptions
from carrylab.regression.draws import FOR_PRINT
from carrylab.regression.fit import fit
from carrylab.regression.sample import Floats, OneStep, Sample, make_sample, take
from carrylab.results import Results
from carrylab.schema import nearest

RHO_STEP = 0.02
PRICED = ("zero_yields", "spot", "prices", "panel")
AVERAGED = "prices are period averages: one more lag of overlap is allowed for, and there are no one-period errors"
Progress = Callable[[str], None]


@dataclass(frozen=True, eq=False, slots=True)
class Built:
    """One market read, checked and turned into parities."""

    market: Market
    data: MarketData
    parities: tuple[Parity, ...]
    checks: tuple[Check, ...]


@dataclass(frozen=True, eq=False, slots=True)
class Fitted:
    """Every fit of one market by parity and horizon, its samples, and its rows."""

    cases: tuple[Case, ...]
    samples: tuple[tuple[str, Sample], ...]
    rows: tuple[Row, ...]


def check(study: Study) -> list[Check]:
    """What the load checks and the identities of every market found."""
    return [found for market in study.markets for found in build(market, study.economies).checks]


def run(study: Study, *, audit: bool = False, progress: Progress | None = None) -> Results:
    """Run a study through every layer; errors of the checks raise DataError before anything is estimated."""
    say = progress or (lambda _step: None)
    clock, timings = time.perf_counter(), {}
    built = []
    for market in study.markets:
        say(f"reading {market.name}")
        built.append(build(market, study.economies))
    timings["read, check and build"] = time.perf_counter() - clock
    refuse_errors(built)
    clock = time.perf_counter()
    fitted = []
    for one in built:
        say(f"estimating {one.market.name}")
        fitted.append(estimate(one, study.economies, study.questions))
    rows = [row for one, done in zip(built, fitted, strict=True) for row in (*_accounts(one), *done.rows)]
    cases = [case for done in fitted for case in done.cases]
    rows += _across([fit for case in cases for fit in case.fits])
    rows += study_joint_rows([case.pooled for case in cases], study.markets[0].inference.joint)
    require_found(study.questions.states, cases)
    rows += asked.study_rows(cases, study.questions)
    timings["estimate"] = time.perf_counter() - clock
    audited = _audited(built, fitted, say) if audit else None
    return Results(
        study=study,
        findings=to_frame(adjust(rows)),
        checks={one.market.name: one.checks for one in built},
        parities=tuple(parity for one in built for parity in one.parities),
        cases=tuple(cases),
        audit=audited,
        timings=timings,
    )


def build(market: Market, economies: Mapping[str, str]) -> Built:
    """Read one market, build its parities and run all its checks."""
    data = read_market(market)
    checks = check_market(data)
    if any(one.level == "error" for one in checks):
        return Built(market, data, (), tuple(checks))
    whole = MARKETS[market.kind](data, economies)
    _require_known(market, [entity for parity in whole for entity in parity.entities])
    _require_surveys(market, whole)
    parities = tuple(_kept(parity, market) for parity in whole)
    main = next(iter(market.sources.values()))[0].file
    proofs = [identity_check(parity, main) for parity in parities]
    return Built(market, data, parities, (*checks, *proofs))


def refuse_errors(built: list[Built]) -> None:
    """Raise DataError with the line of every error the checks found."""
    lines = [one.line() for market in built for one in market.checks if one.level == "error"]
    if lines:
        raise DataError("\n".join(lines))


def _require_known(market: Market, entities: Iterable[Entity]) -> None:
    """Every code that is left out must be one of the market's."""
    known = {code for e in entities for code in (e.name, e.economy, e.currency, e.index) if code}
    for code in market.leave_out:
        if code not in known:
            raise StudyError(
                f"market {market.name!r}, key leave_out: {code!r} is not in this market{nearest(code, known)}; allowed "
                f"are {', '.join(sorted(known))}"
            )


def _require_surveys(market: Market, parities: Iterable[Parity]) -> None:
    """Every survey must be of a leg of one of the market's parities, over that parity's horizon."""
    known = [(leg.name, str(parity.horizon)) for parity in parities for leg in parity.legs]
    for survey in market.surveys:
        if (survey.leg, str(survey.horizon)) not in known:
            allowed = ", ".join(dict.fromkeys(f"{leg} over {horizon}" for leg, horizon in known))
            raise StudyError(
                f"market {market.name!r}, key surveys: no parity has the leg {survey.leg!r} over {survey.horizon}"
                f"{nearest(survey.leg, dict.fromkeys(leg for leg, _ in known))}; allowed are {allowed}"
            )


def _kept(parity: Parity, market: Market) -> Parity:
    """The parity without the entities the study leaves out."""
    out = set(market.leave_out)
    stay = [i for i, e in enumerate(parity.entities) if not out & {e.name, e.economy, e.currency, e.index}]
    if len(stay) == len(parity.entities):
        return parity
    if not stay:
        raise StudyError(f"market {market.name!r}, key leave_out: {sorted(out)} leaves no entity; leave out fewer")
    return replace(
        parity,
        entities=tuple(parity.entities[i] for i in stay),
        signal=parity.signal[:, stay],
        legs=tuple(_columns(leg, stay) for leg in parity.legs),
    )


def _columns(leg: Leg, stay: list[int]) -> Leg:
    one_step = None if leg.one_step is None else leg.one_step[:, stay]
    return replace(leg, values=leg.values[:, stay], one_step=one_step)


def terms_of(parity: Parity, data: MarketData) -> tuple[tuple[str, ...], Floats]:
    """Names and values (T, N, K) of the signal and the added predictors, NaN for holes."""
    named = {"signal": parity.signal}
    if data.market.panel is not None:
        (panel,) = data.tables["panel"]
        named |= {name: predictor(panel, name, parity) for name in data.market.panel.controls}
    named |= {table.source.role: _control(table, parity) for table in data.controls}
    return tuple(named), np.stack(list(named.values()), axis=2)


def _control(table: Table, parity: Parity) -> Floats:
    """An added predictor (T, N), by date or by the entity's own code."""
    codes = [" ".join(_code(entity, key) for key in table.keys) for entity in parity.entities]
    return as_of(parity.calendar, table, codes)


def _code(entity: Entity, key: str) -> str:
    """The entity's code as a table writes it: a maturity in its canonical form."""
    code = entity.group(key)
    return parse_tenor(code).canonical if key == "maturity" and code else code


def sample_of(parity: Parity, data: MarketData) -> tuple[Sample, Floats]:
    """The sample of one parity with all its entities, and the terms with their holes."""
    names, terms = terms_of(parity, data)
    steps = np.where(parity.window.ends >= 0, parity.window.ends - np.arange(len(parity.calendar)), 0)
    sample = make_sample(
        terms,
        np.stack([leg.values for leg in parity.legs], axis=2),
        terms=names,
        legs=[leg.name for leg in parity.legs],
        steps=steps,
        # An average over a period reaches one period further back, so its changes overlap by one more.
        overlap=parity.window.overlap + int(is_averaged(data)),
        one_step=[_one_step(leg, int(steps.max())) for leg in parity.legs],
        label=f"{parity.market}, {parity.name}, {parity.horizon}",
    )
    return sample, terms


def is_averaged(data: MarketData) -> bool:
    """Whether the market's prices or yields are averages over the period."""
    priced = (table for role in PRICED for table in data.tables.get(role, ()))
    return any(table.source.timing == "average" for table in priced)


def _one_step(leg: Leg, steps: int) -> OneStep | None:
    if leg.one_step is None:
        return None
    weights = np.ones(steps) if leg.step_weights is None else leg.step_weights
    return OneStep(leg.one_step, weights)


def estimate(built: Built, economies: Mapping[str, str], questions: Questions | None = None) -> Fitted:
    """Fit every parity of one market, pooled and by group, and write its rows."""
    asking = questions or Questions()
    cases = tuple(_case(parity, built, economies, asking) for parity in built.parities)
    families = [case.fits for case in cases]
    drawn = _drawn(built, families, draws_of(built.market.inference, families))
    rows = list(drawn.rows)
    said = [AVERAGED] if is_averaged(built.data) else []
    said += [drawn.refused] if drawn.refused else []
    for case in cases:
        family, parity = case.fits, case.parity
        for one in family:
            rows += [*share_rows(one, drawn=drawn.covers(one)), *summary_rows(one, said), *other_rows(one)]
        rows += group_rows(family[1:], built.market.inference.joint)
        rows += regression_ledger_rows(family[0])
        rows += latest_rows(family[0], case.terms)
        rows += _other_rho(parity, built, economies)
        rows += asked.case_rows(case, asking)
    samples = tuple((one.sample.label, one.sample) for family in families for one in family)
    return Fitted(cases, samples, tuple(rows))


def draws_of(inference: Inference, families: Sequence[Sequence[Fit]]) -> int:
    """How many draws to make: as asked, or enough for print where the automatic choice of errors calls for them."""
    if inference.draws is not None:
        return inference.draws
    return FOR_PRINT if any(family[0].errors.needs_draws for family in families) else 0


def _case(parity: Parity, built: Built, economies: Mapping[str, str], asking: Questions | None = None) -> Case:
    """One parity with its fits, pooled and by group, and the states that are asked about."""
    sample, terms = sample_of(parity, built.data)
    fits = tuple(_fits(parity, sample, built.market))
    found = (_labelled(state, fits[0], terms) for state in (asking.states if asking else ()))
    states = tuple(state for state in found if state is not None)
    rebuild = _rebuild(parity, built, economies)
    surveys = tuple(_surveys(parity, built.data))
    options = error_options(built.market.inference)

    def draw(families: Sequence[Sequence[Fit]]) -> DrawnRows:
        wanted = built.market.inference.draws
        return _drawn(built, families, FOR_PRINT if wanted is None else wanted)

    curve = _curve(parity, built) if asking and asking.components and parity.name == "forward-spot" else None
    return Case(parity, fits, terms, options, rebuild, draw, states, surveys, curve)


def _curve(parity: Parity, built: Built) -> Curve:
    """Yields of the parity's economies at its horizon and maturities."""
    quoted = curves(built.data.tables["zero_yields"], built.data.calendar, "economy", "maturity")
    known = YieldCurves(quoted, built.market)
    economies = tuple(dict.fromkeys(entity.economy for entity in parity.entities))
    columns = [quoted.codes.index(code) for code in economies]
    tenors = knots(parity.horizon, [entity.maturity for entity in parity.entities])
    return Curve(economies, tuple(tenors), np.stack([known.yields(tenor)[:, columns] for tenor in tenors], axis=2))


def _surveys(parity: Parity, data: MarketData) -> Iterator[Expected]:
    """The survey expectations of this parity's legs over its horizon."""
    names = [leg.name for leg in parity.legs]
    for survey, table in zip(data.market.surveys, data.surveys, strict=True):
        if survey.horizon == parity.horizon and survey.leg in names:
            values = to_decimal(_control(table, parity), survey.source.unit)
            yield Expected(names.index(survey.leg), np.log1p(values) if survey.growth else values)


def _labelled(state: State, fit: Fit, terms: Floats) -> Labelled | None:
    """A state on the parity's calendar, from its file or by its rule; None where its series is another market's."""
    note = "" if state.known else "dated afterwards, not known at the time"
    if state.rule is not None:
        labels = rule_labels(state, state.rule, fit, terms)
        return None if labels is None else Labelled(state.name, labels, note)
    assert state.source is not None
    return Labelled(state.name, read_labels(state.source, state.name, fit.parity.calendar), note)


def _rebuild(parity: Parity, built: Built, economies: Mapping[str, str]) -> Rebuild:
    """What builds one parity again at other horizons, with its pooled fit alone, or says why it cannot."""

    def at_horizon(horizon: Tenor) -> Case:
        other = replace(built.market, horizons=(horizon,), parities=(parity.name,), by="pooled")
        data = replace(built.data, market=other)
        (again,) = MARKETS[other.kind](data, economies)
        return _case(_kept(again, other), replace(built, market=other, data=data), economies)

    def at_horizons(horizons: Sequence[Tenor]) -> Rebuilt:
        cases, refused = [], []
        for horizon in horizons:
            try:
                cases.append(at_horizon(horizon))
            except (StudyError, DataError, SampleError) as why:
                refused.append((horizon, str(why)))
        return Rebuilt(tuple(cases), tuple(refused))

    return at_horizons


def _drawn(built: Built, families: Sequence[Sequence[Fit]], count: int) -> DrawnRows:
    """Rows of the draws under the null: of whole curves for bonds, of returns and signals for all else."""
    market, seed = built.market, built.market.inference.seed
    if market.kind != "bonds" or not count:
        return drawn_rows(families, count, seed)
    quoted = curves(built.data.tables["zero_yields"], built.data.calendar, "economy", "maturity")
    return curve_rows(families, YieldCurves(quoted, market), count, seed)


def _fits(parity: Parity, sample: Sample, market: Market) -> Iterator[Fit]:
    """The pooled fit first, then one by group where the study asks for groups."""
    yield _fit(parity, sample, "pooled", market)
    if market.by == "pooled":
        return
    labels = [entity.group(market.by) for entity in parity.entities]
    for label in dict.fromkeys(labels):
        columns = [i for i, own in enumerate(labels) if own == label]
        part = take(sample, columns, label=f"{sample.label}, {market.by} {label}")
        yield replace(_fit(parity, part, label, market), columns=tuple(columns))


def pooled_fit(parity: Parity, built: Built) -> Fit:
    """One parity of a market with all its entities, and the study's errors."""
    return _fit(parity, sample_of(parity, built.data)[0], "pooled", built.market)


def _fit(parity: Parity, sample: Sample, group: str, market: Market, name: str = "all") -> Fit:
    options = error_options(market.inference)
    found = fit(sample, effects=market.effects)
    errors = errors_of(parity, sample, found, options)
    return Fit(parity, group, sample, found, errors, market.inference.confidence, name)


def error_options(inference: Inference) -> ErrorOptions:
    """The study's choice of errors as the routines take it."""
    return ErrorOptions(inference.errors, inference.lags, inference.factor, inference.reference)


def _other_rho(parity: Parity, built: Built, economies: Mapping[str, str]) -> list[Row]:
    """The resolved premium share again at rho a little lower and higher."""
    if parity.rho is None:
        return []
    rows: list[Row] = []
    for step in (-RHO_STEP, RHO_STEP):
        if not 0 < parity.rho + step < 1:
            continue
        other = replace(built.market, rho=parity.rho + step, parities=(parity.name,), horizons=(parity.horizon,))
        again = _kept(MARKETS[other.kind](replace(built.data, market=other), economies)[0], other)
        found = _fit(again, sample_of(again, built.data)[0], "pooled", other, f"rho {step:+.2f}")
        rows += [row for row in share_rows(found) if row["term"] == "resolved premium share"]
    return rows


def _accounts(built: Built) -> list[Row]:
    rows = [*ledger_rows(built.data), *check_rows(built.market.name, built.checks)]
    for parity in built.parities:
        proof = identity(parity)
        rows += [identity_row(parity, proof)] if proof else []
    return rows


def _across(fits: list[Fit]) -> list[Row]:
    """Compare markets on carry, and on each market's own spread, where horizon and interval are the same."""
    pooled = [one for one in fits if one.group == "pooled" and one.has_identity and one.leg_of("return") is not None]
    own = {one.parity.market: one.parity.name for one in reversed(pooled)}
    chosen = {
        "carry": [one for one in pooled if one.parity.name == "carry"],
        "each market's own spread": [one for one in pooled if one.parity.name == own[one.parity.market]],
    }
    rows: list[Row] = []
    for what, candidates in chosen.items():
        for place in dict.fromkeys(_horizon_and_interval(one) for one in candidates):
            rows += across_rows([one for one in candidates if _horizon_and_interval(one) == place], what)
    return rows


def _horizon_and_interval(one: Fit) -> tuple[Tenor, str]:
    return one.parity.horizon, one.parity.calendar.interval


def _audited(built: list[Built], fitted: list[Fitted], say: Progress) -> Audit:
    found = []
    for one, done in zip(built, fitted, strict=True):
        say(f"auditing {one.market.name}")
        found.append(audit_samples(done.samples, one.market.effects, error_options(one.market.inference)))
    not_compared = dict.fromkeys(text for part in found for text in part.not_compared)
    return Audit(tuple(row for part in found for row in part.comparisons), tuple(not_compared))
