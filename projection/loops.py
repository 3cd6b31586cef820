"""The compiled loops: where each policy stands, and what each of its streams is worth.

Everything compiled lives in this one file, because a compiled function is kept on disk by the state of its
own file alone. Nothing here raises: a policy that cannot be valued gets a reason, and the others go on. Sums
are taken in an order that depends on the policy only. Letters as in the page of conventions: T valuation
date, g a point in months since commencement, k and f the whole months and the rest of the last one at T.
"""

from __future__ import annotations

from typing import Any, Final, NamedTuple

import numba as nb
import numpy as np
from llvmlite import ir
from numba.core import cgutils, types
from numba.extending import intrinsic

from portfolios.reasons import Reason

from . import streams as s
from .pool import ONES

BINS = s.LONGEST + 64
"""Calendar months that cash flows may fall in, from the month of T."""

AFTER: Final = 0
BEFORE: Final = 1
DYING: Final = 2
LAPSING: Final = 3
SPREAD: Final = 4
KINDS: Final = 5
"""Kinds of weights, for each life and for both: after and before lapses, of deaths, of lapses of survivors, spread."""

CERTAINLY: Final = 3 * KINDS
TOGETHER: Final = CERTAINLY + 1
ROOM: Final = TOGETHER + 1
"""Rows to work in: weights by life and kind, ones, survival of both lives. Rows on named states lie behind them."""

MAGIC = 6755399441055744.0
"""1.5 * 2^52: a number added to it is rounded to a whole one, half to even, which then stands in its last bits."""

FAST = 2.0**50
"""Quanta up to which payments are rounded in this way."""

PIECES: Final = 4096
"""Most pieces that a larger payment is cut into; a policy with one beyond that is not valued."""

BEYOND: Final = 1e30
"""Value of a stream with such a payment: more than a policy's results may reach."""

MAGIC_BITS = int(np.float64(MAGIC).view(np.int64))

_NO_SURVIVAL = int(Reason.NO_SURVIVAL)
_MONTHS = int(Reason.NOT_WHOLE_MONTHS)
_YEARS = int(Reason.NOT_WHOLE_YEARS)
_ORDER = int(Reason.END_BEFORE_START)
_PERIOD = int(Reason.NOT_WHOLE_PERIODS)
_TABLE = int(Reason.TABLE_ENDS_EARLY)
_MATURED = int(Reason.MATURED)
_NOT_FINITE = int(Reason.RESULT_NOT_FINITE)

LARGEST_RESULT = 1e15
"""Minor units that a policy's results may reach; sums over many millions of policies stay exact."""

_SHARES = np.array([0] + [(1 << 32) // period + 1 for period in range(1, 13)], dtype=np.int64)

compiled = nb.njit(cache=True, nogil=True, error_model="numpy")

_INNER: Any = {"nogil": True, "error_model": "numpy", "no_cpython_wrapper": True, "no_cfunc_wrapper": True}

inner = nb.njit(**_INNER)
"""For functions that only compiled ones call: nothing is compiled for calls from Python, nor kept for itself."""

inlined = nb.njit(**_INNER, forceinline=True)
"""For inner functions with many arguments that are called once per stream: the call costs as much as the work."""


class Rules(NamedTuple):
    """What holds for the whole run.

    step: months; outstanding: 1 if payments due on T are to come; fractions: 0 constant force, 1 uniform
    deaths, 2 Balducci; dependent: 1 for decrements uniform in their single tables; quantum: cash flows are
    rounded to whole multiples of 1 / quantum; minor: minor units in one of currency; shock: force of a cause from
    which both lives die at once; sign: -1 to take cash flows back.
    """

    step: int
    outstanding: int
    fractions: int
    dependent: int
    quantum: float
    minor: float
    shock: float
    sign: float = 1.0


class Tables(NamedTuple):
    """Everything that the policies of a chunk are valued from: records, and the pool of rows."""

    segments: Any
    survivals: Any
    pool: Any
    money: Any
    whole: Any
    chains: Any
    sources: Any
    members: Any


class Results(NamedTuple):
    """Per policy: reason (0: valued), the segment at fault, parts in currency (n, 3), and money in minor units (n, 4).

    The columns of parts are benefits, expenses and premiums; those of minor the reserve and then the parts.
    flows: expected cash flows by account and calendar month, BINS to an account, in whole quanta. months:
    policy-months projected, one number. room, filled, firsts, counts and lives are to work in.
    """

    reason: Any
    fault: Any
    parts: Any
    minor: Any
    flows: Any
    months: Any
    room: Any
    filled: Any
    firsts: Any
    counts: Any
    lives: Any


@intrinsic
def unowned(typing_context, array):
    """The same array without a count of its owners.

    Counting owners at every call is an atomic operation on memory that the threads share; it took ten times
    as long as the arithmetic. The caller of the compiled function owns the arrays while it runs.
    """

    def build(context, builder, signature, args):
        whole = context.make_array(signature.args[0])(context, builder, args[0])
        whole.meminfo = cgutils.get_null_value(whole.meminfo.type)
        whole.parent = cgutils.get_null_value(whole.parent.type)
        return whole._getvalue()

    return array(array), build


@intrinsic
def bits(typing_context, number):
    """The 64 bits of a double as a whole number."""

    def build(context, builder, signature, args):
        return builder.bitcast(args[0], ir.IntType(64))

    return types.int64(types.float64), build


LANES = 8
"""Partial sums in which payments at every point are added up; two vectors of four doubles."""


def _summing(relative):
    """Return the maker of a sum of n payments, with their relative amounts or without, in vector instructions.

    Payment j goes into sum j mod 8, and the last n mod 8 payments into one of their own; then the sums are folded
    in a fixed way. The compiler does not do this by itself, since it may not reorder a sum. What is added stands
    in plain words further down, where nothing is compiled.
    """

    def summing(typing_context, room, w, pool, d, r, flows, f, n, scale):
        double, whole = ir.DoubleType(), ir.IntType(64)
        fours, wholes = ir.VectorType(double, LANES // 2), ir.VectorType(whole, LANES // 2)

        def build(context, builder, signature, args):
            datas = [context.make_array(signature.args[at])(context, builder, args[at]).data for at in (0, 2, 5)]
            starts = [args[1], args[3], args[4], args[6]]
            weights, discounts, relatives, cash = (
                builder.gep(data, [start])
                for data, start in zip((datas[0], datas[1], datas[1], datas[2]), starts, strict=True)
            )
            count, scale = args[7], args[8]

            def spread(value):
                """A vector that holds a number four times."""
                empty = ir.Constant(fours, ir.Undefined)
                first = builder.insert_element(empty, value, ir.Constant(ir.IntType(32), 0))
                zeros = ir.Constant(ir.VectorType(ir.IntType(32), LANES // 2), [0] * (LANES // 2))
                return builder.shuffle_vector(first, empty, zeros)

            def step(at, shape, integers, scale, magic, bits, total):
                """Payments at a place: adds them to cash flows and total."""

                def place(data, kind):
                    return builder.bitcast(builder.gep(data, [at]), kind.as_pointer())

                x = builder.load(place(weights, shape), align=8)
                if relative:
                    x = builder.fmul(x, builder.load(place(relatives, shape), align=8))
                factor = builder.load(place(discounts, shape), align=8)
                flow = builder.load(place(cash, integers), align=8)
                rounded = builder.bitcast(builder.fadd(builder.fmul(x, scale), magic), integers)
                flow = builder.add(flow, builder.sub(rounded, bits))
                builder.store(flow, place(cash, integers), align=8)
                builder.store(builder.fadd(builder.load(total), builder.fmul(x, factor)), total)

            none = ir.Constant(fours, [0.0] * (LANES // 2))
            first, second = (cgutils.alloca_once_value(builder, none) for _ in range(2))
            rest = cgutils.alloca_once_value(builder, ir.Constant(double, 0.0))
            magics = ir.Constant(fours, [MAGIC] * (LANES // 2))
            many = (fours, wholes, spread(scale), magics, ir.Constant(wholes, [MAGIC_BITS] * (LANES // 2)))
            single = (double, whole, scale, ir.Constant(double, MAGIC), ir.Constant(whole, MAGIC_BITS))
            eights = builder.udiv(count, ir.Constant(whole, LANES))
            with cgutils.for_range(builder, eights) as loop:
                at = builder.mul(loop.index, ir.Constant(whole, LANES))
                step(at, *many, first)
                step(builder.add(at, ir.Constant(whole, LANES // 2)), *many, second)
            done = builder.mul(eights, ir.Constant(whole, LANES))
            with cgutils.for_range(builder, builder.sub(count, done)) as loop:
                step(builder.add(done, loop.index), *single, rest)
            sums = builder.fadd(builder.load(first), builder.load(second))
            a, b, c, e = (builder.extract_element(sums, ir.Constant(ir.IntType(32), lane)) for lane in range(4))
            return builder.fadd(builder.fadd(builder.fadd(a, b), builder.fadd(c, e)), builder.load(rest))

        u = types.uint64
        return types.float64(room, u, pool, u, u, flows, u, u, types.float64), build

    return summing


add_up = intrinsic(_summing(False))
add_up_relative = intrinsic(_summing(True))


if nb.config.DISABLE_JIT:
    # Without compilation nobody counts owners, and the bits of a double are had through a view.

    def unowned(array):
        """The array itself."""
        return array

    def bits(number):
        """The 64 bits of a double as a whole number."""
        return np.float64(number).view(np.int64)

    def add_up_relative(room, w, pool, d, r, flows, f, n, scale):
        """Sum of payments, which are added to the cash flows."""
        total = 0.0
        for j in range(n):
            x = room[w + j] * pool[r + j]
            flows[f + j] += quanta(x * scale)
            total += x * pool[d + j]
        return total

    def add_up(room, w, pool, d, r, flows, f, n, scale):
        """The same with relative amounts of 1."""
        total = 0.0
        for j in range(n):
            flows[f + j] += quanta(room[w + j] * scale)
            total += room[w + j] * pool[d + j]
        return total


def records(array: Any) -> Any:
    """Records whose fields read as attributes, also where nothing is compiled."""
    return array.view(np.recarray) if nb.config.DISABLE_JIT else array


@inner
def quanta(amount):
    """An amount rounded to a whole number, half to even; below 2^51 in absolute value."""
    return bits(amount + MAGIC) - MAGIC_BITS


@inner
def civil(day):
    """Year, month and day of a day count, by the proleptic Gregorian calendar.

    Days are counted within eras of 400 years that start on 1 March, so that the leap day comes last.
    """
    z = day + 719468
    era = z // 146097
    doe = z - era * 146097
    yoe = (doe - doe // 1460 + doe // 36524 - doe // 146096) // 365
    doy = doe - (365 * yoe + yoe // 4 - yoe // 100)
    mp = (5 * doy + 2) // 153
    month = mp + 3 if mp < 10 else mp - 9
    year = yoe + era * 400 + (1 if month <= 2 else 0)
    return year, month, doy - (153 * mp + 2) // 5 + 1


@inner
def day_count(year, month, day):
    """Days since 1970-01-01 of a date; the month's last day where the day is missing."""
    if day > 28:
        last = 31
        if month == 2:
            last = 29 if (year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)) else 28
        elif month in (4, 6, 9, 11):
            last = 30
        day = min(day, last)
    y = year - 1 if month <= 2 else year
    era = y // 400
    yoe = y - era * 400
    mp = month - 3 if month > 2 else month + 9
    doy = (153 * mp + 2) // 5 + day - 1
    doe = yoe * 365 + yoe // 4 - yoe // 100 + doy
    return era * 146097 + doe - 719468


@inner
def months_later(year, month, day, months):
    """Day count of the date so many months later; the month's last day where the day is missing."""
    index = np.int64(year) * 12 + month - 1 + months
    return day_count(index // 12, index % 12 + 1, np.int64(day))


class Places(NamedTuple):
    """Where policies stand at T, one array each, in the order of the extract.

    k, part, whole: months passed, and part / whole of the next one; shift: calendar months from that of T to
    that of commencement; day: of the month of commencement.
    """

    k: Any
    part: Any
    whole: Any
    shift: Any
    day: Any


class Today(NamedTuple):
    """The valuation date: days since 1970-01-01, its date, and the lengths of the months before, at and after it."""

    count: int
    year: int
    month: int
    day: int
    before: int
    current: int
    after: int


class Ages(NamedTuple):
    """Ages of lives at commencement, one array each, in the order of the extract.

    age: completed years; since, span: days from the last birthday to commencement and to the next birthday,
    filled in where asked for.
    """

    age: Any
    since: Any
    span: Any


@compiled
def locate(commencement, reason, today, step, places):
    """Fill in the places of all policies that have no reason against them yet; today: Today, the valuation date."""
    td, before, current, after = today.day, today.before, today.current, today.after
    for i in range(len(reason)):
        if reason[i] != 0:
            continue
        cy, cm, cd = civil(np.int64(commencement[i]))
        shift = (cy - today.year) * 12 + cm - today.month
        if step == 1:
            due = min(cd, current)
            if due <= td:
                k, passed, whole = -shift, td - due, current - due + min(cd, after)
            else:
                earlier = min(cd, before)
                k, passed, whole = -shift - 1, before - earlier + td, before - earlier + due
        else:
            k = -shift // 12 * 12
            last = months_later(cy, cm, cd, k)
            if last > today.count:
                k -= 12
                last = day_count(cy + k // 12, cm, cd)
            whole = months_later(cy, cm, cd, k + 12) - last
            passed = (today.count - last) * 12
            k += passed // whole
            passed = passed % whole
        places.k[i], places.part[i], places.whole[i] = k, passed, whole
        places.shift[i], places.day[i] = shift, cd


@compiled
def find_ages(birth, commencement, fine, days_of_age, ages):
    """Fill in the ages of the lives that count; days_of_age: whether the age basis looks at days."""
    for i in range(len(fine)):
        if not fine[i]:
            continue
        cy, cm, cd = civil(np.int64(commencement[i]))
        by, bm, bd = civil(np.int64(birth[i]))
        age = cy - by
        if cm < bm or (cm == bm and cd < bd and day_count(cy, bm, bd) > commencement[i]):
            age -= 1
        ages.age[i] = age
        if days_of_age:
            birthday = day_count(by + age, bm, bd)
            ages.since[i] = commencement[i] - birthday
            ages.span[i] = day_count(by + age + 1, bm, bd) - birthday


class Found(NamedTuple):
    """Numbers of what was found for each policy, in the order of the extract, and what the numbers stand for.

    cell, survival, second, lapse, discount: a number per policy; ranges: (cell, 2) first segment and behind the last;
    persistency: (lapse, 3) places of held, dead and lapsing; factors: (discount, 2) places of payment and claim;
    accrued: (discount, 2) factors to them. chain, state: numbers per policy, chain -1 where it has none;
    sources: (cell, 2) first source and behind the last; leaving: per cell the bits of the states that lapse; going:
    (lapse,) places of the shares that lapse of those still there.
    """

    cell: Any
    survival: Any
    second: Any
    lapse: Any
    discount: Any
    ranges: Any
    persistency: Any
    factors: Any
    accrued: Any
    chain: Any
    state: Any
    sources: Any
    leaving: Any
    going: Any


@compiled
def fill_policies(order, places, found, claim_after, step, policies):
    """Fill the records of policies, in the order of calculation.

    claim_after: months from the start of a step to the payment of its death claims; below 0: at its end.
    """
    for j in range(len(order)):
        i = order[j]
        p = policies[j]
        p.k, p.part, p.whole, p.shift = places.k[i], places.part[i], places.whole[i], places.shift[i]
        p.segments, p.segments_end = found.ranges[found.cell[i], 0], found.ranges[found.cell[i], 1]
        p.survival, p.second = found.survival[i], found.second[i]
        lapse, discount = found.lapse[i], found.discount[i]
        p.held, p.dead, p.lapsing = (
            found.persistency[lapse, 0],
            found.persistency[lapse, 1],
            found.persistency[lapse, 2],
        )
        p.payment, p.claim = found.factors[discount, 0], found.factors[discount, 1]
        p.payment_accrued, p.claim_accrued = found.accrued[discount, 0], found.accrued[discount, 1]
        p.chain, p.state = found.chain[i], found.state[i]
        if p.chain >= 0:
            # Lapses are in the rows on named states, so that nothing else knows of them.
            p.sources, p.sources_end = found.sources[found.cell[i], 0], found.sources[found.cell[i], 1]
            p.leaving, p.keep = found.leaving[found.cell[i]], found.going[found.lapse[i]]
            p.held = p.dead = p.lapsing = ONES + 1
        p.claim_shift = p.claim_first = 0
        if claim_after >= 0.0:
            # What has passed of the step of T at T brings the middle of the rest half as much nearer to its end.
            passed = p.k % step + p.part / p.whole
            day = (places.day[i] - 1) / 30.4375
            p.claim_shift = np.int64(np.floor(day + claim_after)) - step
            p.claim_first = np.int64(np.floor(day + claim_after + passed / 2)) - step


@compiled
def months_to_age(birth, commencement, concerned, age, step, months):
    """Fill in the months from commencement to the first due date on or after a birthday, at least 0."""
    for i in range(len(concerned)):
        months[i] = 0
        if not concerned[i]:
            continue
        cy, cm, cd = civil(np.int64(commencement[i]))
        by, bm, bd = civil(np.int64(birth[i]))
        g = (by + age - cy) * 12 + bm - cm
        if months_later(cy, cm, cd, g) < day_count(by + age, bm, bd):
            g += 1
        months[i] = max(0, -(-g // step) * step)


@compiled
def whole_months(years, order, longest, months):
    """Fill in durations in years as whole months, in an order; -1 for a missing, negative or broken one."""
    for j in range(len(order)):
        exact = 12.0 * years[order[j]]
        nearest = np.rint(exact)
        good = abs(exact - nearest) <= 1e-6 and 0.0 <= nearest <= longest
        months[j] = np.int32(nearest) if good else -1


@inner
def fraction_survived(q, part, rule):
    """Survival F(q, s) through the first part s of a year under a rule for fractions of a year."""
    if part <= 0.0:
        return 1.0
    if rule == 0:
        return np.exp(part * np.log1p(-q)) if q < 1.0 else 0.0
    if rule == 1:
        return 1.0 - part * q
    return (1.0 - q) / (1.0 - (1.0 - part) * q)


@compiled
def fill_living(yearly, reached, passed, rule, living):
    """Fill a row of survival from commencement at points g = 0, 1 ..., given the rates of the years of age."""
    base = fraction_survived(yearly[0], passed, rule)
    if base <= 0.0:  # a rate of 1 in the year of age in which an exact age lies
        for g in range(len(living)):
            living[g] = 0.0
        return
    for g in range(len(living)):
        if passed == 0.0:
            year, part = g // 12, (g % 12) / 12.0
        else:
            since = passed + g / 12.0
            year = np.int64(np.floor(since))
            part = since - year
        if year >= len(yearly):
            living[g] = reached[len(yearly)] / base
        else:
            living[g] = reached[year] * fraction_survived(yearly[year], part, rule) / base


@inner
def survival_at(survival, pool, months, rule):
    """Survival L from commencement to any real number of months later."""
    base = fraction_survived(pool[survival.yearly], survival.passed, rule)
    if base <= 0.0:
        return 0.0
    since = survival.passed + months / 12.0
    year = np.int64(np.floor(since))
    if year >= survival.years:
        return pool[survival.reached + survival.years] / base
    return pool[survival.reached + year] * fraction_survived(pool[survival.yearly + year], since - year, rule) / base


@inner
def sum_monthly(room, weight, pool, relative, discount, flows, flow, count, amount, rules):
    """Sum of payments at every point: amount x weight x relative x discount; adds them to the cash flows.

    weight ... flow: places of the first payment.
    """
    n, w, f, d = np.uint64(count), np.uint64(weight), np.uint64(flow), np.uint64(discount)
    if relative == ONES:
        return amount * add_up(room, w, pool, d, d, flows, f, n, amount * rules.quantum)
    r = np.uint64(relative)
    return amount * add_up_relative(room, w, pool, d, r, flows, f, n, amount * rules.quantum)


@inner
def sum_apart(lives, pool, living, held, relative, discount, a, b, flows, flow, count, hop, amount, quantum):
    """The same for payments ``hop`` points from one another, with a and b times survival at both ends as occupancy."""
    scale = amount * quantum
    o, h, r, d, f = np.uint64(living), np.uint64(held), np.uint64(relative), np.uint64(discount), np.uint64(flow)
    e = np.uint64(living - hop) if a != 0.0 else o
    hop = np.uint64(hop)
    total = 0.0
    for _ in range(count):
        x = (a * lives[e] + b * lives[o]) * pool[h] * pool[r]
        flows[f] += quanta(x * scale)
        total += x * pool[d]
        e, o, h, r, d, f = e + hop, o + hop, h + hop, r + hop, d + hop, f + hop
    return amount * total


@inlined
def weights(kind, lives, pool, living, held, first, count, filled, room):
    """Place of the first of some monthly weights, survival x persistency; fills in what is missing.

    kind: AFTER ... SPREAD, of a life; living, held: places of g = 0 in the rows that the kind takes, the former
    in ``lives``; filled: (kind, 2) the points for which the room holds weights, forgotten when other rows come along.
    """
    base = kind * BINS
    low, high = filled[kind, 0], filled[kind, 1]
    if low >= high:
        low, high = first, first
    fill_weights(kind % KINDS, lives, pool, living, held, first, low, base, room)
    fill_weights(kind % KINDS, lives, pool, living, held, high, first + count, base, room)
    filled[kind, 0], filled[kind, 1] = min(first, low), max(first + count, high)
    return base + first


@inner
def fill_weights(kind, lives, pool, living, held, begin, end, base, room):
    """Fill in the weights of the points from ``begin`` up to but not including ``end``."""
    if end <= begin:
        return
    n = np.uint64(end - begin)
    o, h, w = np.uint64(living + begin), np.uint64(held + begin), np.uint64(base + begin)
    if kind in (AFTER, BEFORE):
        for j in range(n):
            room[w + j] = lives[o + j] * pool[h + j]
        return
    e = np.uint64(living + begin - 1)
    a, b = 0.0, 1.0
    if kind == DYING:
        a, b = 1.0, -1.0
    elif kind == SPREAD:
        a, b = 0.5, 0.5
    for j in range(n):
        room[w + j] = (a * lives[e + j] + b * lives[o + j]) * pool[h + j]


@inner
def periods_in(months, period):
    """Whole periods of 1, 3, 6 or 12 months in a number of months from 0 to 2^20.

    By multiplication with 2^32 / period, rounded up; the processor's division takes ten times as long.
    """
    if period == 1:
        return months
    return (months * _SHARES[period]) >> 32


@inner
def leftover(months, period):
    """What whole periods leave of a number of months."""
    return months - periods_in(months, period) * period


@inner
def first_due(start, period, least):
    """The first of start, start + period ... that is at least ``least``."""
    if start >= least:
        return start
    return start + periods_in(least - start + period - 1, period) * period


@inlined
def entry(whole, row, j):
    """A whole number of a policy; places are unsigned, which spares a look for negative ones."""
    return np.int64(whole[np.uint64(row), np.uint64(j)])


@inlined
def formula_from(stream, start, p, rules):
    """First point of the first year of a stream that Woolhouse's formula takes; the year of T keeps its own dates."""
    whole = p.part == 0 and (rules.outstanding == 1 or stream.before == 1)
    return first_due(start, 12, p.k if whole else p.k + 1)


@inner
def span_start(stream, start):
    """First relative month of a segment. A first span takes months before the stream's start too: years from 0."""
    return max(start + stream.span_from, stream.clip_from) if stream.span_from > 0 else stream.clip_from


@inlined
def extent(stream, whole, j, p, life, rules):
    """Reason, first point and number of points after T of a segment of streams, and whether it lasts to T.

    whole, j: the matrix of whole numbers and the policy's place in it. A payment due exactly on T is not among
    the points.
    """
    k = p.k
    if stream.clip_to <= k - 12:
        return 0, 0, 0, False
    over, last = life.over, life.last
    lives = stream.cover != s.CERTAIN and stream.cover != s.BEGUN
    start = entry(whole, stream.start, j)
    end = entry(whole, stream.end, j) if stream.end >= 0 else max(start, over)
    if start < 0 or end < 0:
        return _MONTHS, 0, 0, False
    if end < start:
        return _ORDER, 0, 0, False
    if lives and life.closed == 0 and (stream.end < 0 or end > over):
        return _TABLE, 0, 0, False
    lasts = end > k or (end == k and p.part == 0)
    low = span_start(stream, start)
    high = min(start + stream.span_to, stream.clip_to)
    when = stream.when
    if when == s.ONCE:
        month = max(start - 1, start if stream.clock == 0 else 0)
        there = start > k and low <= month < high and (start <= last or not lives)
        return 0, start, 1 if there else 0, lasts
    if when == s.DEATH or when == s.LAPSE:
        step = rules.step
        if step == 1:
            begin = max(k, start, low)
            return 0, begin + 1, max(0, min(end, last, high) - begin), lasts
        if leftover(start, step) != 0 or (stream.end >= 0 and leftover(end, step) != 0):
            return _YEARS, 0, 0, False
        # The first step after T starts at or before it; a later one starts where the stream or the clip does.
        begin = max(k - leftover(k, step), first_due(0, step, max(start, low)))
        finish = min(end, last + step - 1, over, high + step - 1)
        return 0, begin + step, periods_in(max(0, finish - begin), step), lasts
    period = entry(whole, stream.period, j)
    if period <= 0 or (stream.whole == 1 and leftover(end - start, period) != 0):
        return _PERIOD, 0, 0, False
    begin = start
    if stream.guarantee >= 0:
        guaranteed = entry(whole, stream.guarantee, j)
        if guaranteed < 0:
            return _MONTHS, 0, 0, False
        if stream.cover != s.AFTER_GUARANTEE:
            # A guarantee for life may outlast the table.
            end = min(end if stream.end >= 0 else s.LONGEST, start + guaranteed)
            if stream.cover == s.BEGUN:
                # Where nobody is left for it, a stream that has not begun never does.
                going = start < k or (start == k and p.part > 0)
                lasts = going and (end > k or (end == k and p.part == 0))
                end = end if going else start
        else:
            # In arrears, the first payment after the guarantee may belong to a period that starts within it.
            begin = start + guaranteed + (1 - period if when == s.ARREARS else 0)
    if stream.window != s.OWN_DATES:
        turn = formula_from(stream, start, p, rules)
        complete = start + (end - start) // 12 * 12
        if stream.window == s.WHOLE_YEARS:
            begin, end, period = max(begin, turn), complete, 12
        elif stream.window == s.BROKEN_YEAR:
            end = end if turn > complete else turn
        else:
            begin = end if turn > complete else complete
    lag = period if when == s.ARREARS else 0
    month = first_due(start, period, max(begin, low, (k if when == s.THIRD_TERM else k + 1) - lag))
    stop = min(end - lag + 1 if lag else end, high)
    if stream.cover == s.ALIVE or stream.cover == s.AFTER_GUARANTEE:
        stop = min(stop, last + 1 - lag)
    return 0, month + lag, periods_in(max(0, stop - month + period - 1), period), lasts


@inner
def due_today(stream, whole, j, p, rules):
    """Whether a segment has a payment to come exactly on T, and its relative month; only asked where T is a point."""
    k = p.k
    start = entry(whole, stream.start, j)
    if stream.window == s.WHOLE_YEARS:
        # The near end of the first year taken by the formula, if the year starts now.
        starts = formula_from(stream, start, p, rules) == k and k + 12 <= (
            entry(whole, stream.end, j) if stream.end >= 0 else s.FOR_EVER
        )
        return starts and stream.when == s.ADVANCE and stream.clip_from <= k < stream.clip_to, k
    if stream.when >= s.DEATH or rules.outstanding == 0:
        return False, 0
    end = entry(whole, stream.end, j) if stream.end >= 0 else s.FOR_EVER
    low = span_start(stream, start)
    high = min(start + stream.span_to, stream.clip_to)
    if stream.when == s.ONCE:
        month = max(k - 1, start if stream.clock == 0 else 0)
        return start == k and low <= month < high, month
    period = entry(whole, stream.period, j)
    lag = period if stream.when == s.ARREARS else 0
    month = k - lag
    if stream.window == s.BROKEN_YEAR:
        complete = start + (end - start) // 12 * 12
        turn = formula_from(stream, start, p, rules)
        end = end if turn > complete else turn
    elif stream.window == s.LAST_YEAR:
        return False, 0
    first = start
    if stream.guarantee >= 0:
        turn = start + entry(whole, stream.guarantee, j)
        if stream.cover == s.GUARANTEED or (stream.cover == s.BEGUN and start < k):
            end = min(end, turn)
        elif stream.cover == s.BEGUN:
            end = start
        else:
            first = turn + (1 - lag if lag else 0)
    due = first <= month < end and month <= end - lag and (month - start) % period == 0
    return due and low <= month < high, month


@inlined
def largest_relative(stream, whole, j, pool):
    """Largest relative amount of a segment at any time; that of a row per policy stands in front of the row."""
    if stream.changing < 0:
        return stream.largest
    row = entry(whole, stream.changing, j)
    return stream.largest if row == ONES else stream.largest * pool[row - 1]


@inner
def largest_so_far(stream, whole, j, pool, last, shift):
    """The same up to a point; the largest amounts so far stand behind the rows."""
    row = stream.relative if stream.changing < 0 else entry(whole, stream.changing, j)
    largest = 1.0
    if row != ONES:
        clock = entry(whole, stream.start, j) if stream.clock == 0 else np.int64(0)
        largest = pool[row + s.WIDE + min(max(0, last - clock), s.WIDE - 1)]
    if stream.calendar >= 0:
        largest *= pool[stream.calendar + s.WIDE + min(max(0, last + shift), s.WIDE - 1)]
    return largest


@inlined
def relative_place(stream, whole, j, month, calendar):
    """Place of the relative amount of a month on the stream's clock, or of a calendar month."""
    if stream.calendar >= 0:
        return stream.calendar + max(0, calendar)
    row = stream.relative if stream.changing < 0 else entry(whole, stream.changing, j)
    if row == ONES:
        return ONES
    clock = entry(whole, stream.start, j) if stream.clock == 0 else 0
    return row + max(0, month - clock)


@inlined
def stand(life, survival, pool, p, rules):
    """Fill in what streams need to know of one life."""
    life.living, life.over, life.closed = survival.living, survival.over, survival.closed
    life.last = np.int64(pool[survival.lasts + min(p.k, survival.over)])
    life.alive = survival_at(survival, pool, p.k + p.part / p.whole, rules.fractions)


@inlined
def outlives(life, p):
    """Whether the valuation date lies after the end of a table that is not closed."""
    return life.closed == 0 and (p.k > life.over or (p.k == life.over and p.part > 0))


@inner
def stand_together(lives, pool, room, p, new, rules):
    """Fill in what streams need to know of both lives; new: whether they are not those of the policy before.

    Without the cause from which both die at once, the lives are independent. It is part of the rates of either,
    so that both live with the product of their survivals times exp(shock x time).
    """
    one, two, both = lives[s.FIRST], lives[s.SECOND], lives[s.JOINT]
    shorter = one if one.over <= two.over else two
    both.living, both.over, both.closed = TOGETHER * BINS, shorter.over, shorter.closed
    both.last = min(one.last, two.last)
    both.alive = one.alive * two.alive
    if rules.shock > 0.0:
        both.alive *= np.exp(rules.shock * (p.k + p.part / p.whole) / 12.0)
    if not new:
        return
    for g in range(both.over + 1):
        room[both.living + g] = pool[one.living + g] * pool[two.living + g]
    if rules.shock > 0.0:
        for g in range(both.over + 1):
            room[both.living + g] *= np.exp(rules.shock * g / 12.0)


@inner
def stand_in_states(lives, chain, p, sources, members):
    """Fill in what streams need to know of each source; return whether the contract may be there, and is beyond."""
    for n in range(p.sources_end - p.sources):
        life, source = lives[np.uint64(s.JOINT + 1 + n)], sources[np.uint64(p.sources + n)]
        row = ROOM + 2 * chain.states + n
        if source.end - source.begin == 1 and members[np.uint64(source.begin)] < 2 * chain.states:
            row = ROOM + members[np.uint64(source.begin)]  # the row of a state itself
        life.living, life.alive = row * BINS, 1.0
        life.over = life.last = chain.over
        life.closed = chain.closed
    if p.state >= chain.states:
        return 1.0, False
    beyond = chain.closed == 0 and (p.k > chain.over or (p.k == chain.over and p.part > 0))
    return 0.0 if chain.closed == 1 and p.k >= chain.over else 1.0, beyond


@inner
def occupy(chain, p, pool, room, furthest, step):
    """Fill the rows of the states of a policy, before and after lapses, from T to a point; return the end of its step.

    The probabilities go forward from the state at T by the matrices of the steps. Of the first, perhaps broken step,
    the state is kept with the probability of the whole step to the power of what is left of it; exits share in
    proportion. ``left``: the share of the whole step's exits. A contract of the dead has no sources to fill.
    """
    size, over = chain.states, chain.over
    before, after = ROOM * BINS, (ROOM + size) * BINS
    for place in range(size):
        there = 1.0 if place == p.state else 0.0
        room[before + place * BINS + p.k] = room[after + place * BINS + p.k] = there
    first = p.k - leftover(p.k, step) + step
    left = 0.0
    row = chain.place + p.state * (size + chain.moves) * over + first - 1
    stay = pool[row + p.state * over]
    for g in range(p.k + 1, min(first, furthest) + 1):
        part = (g - p.k - p.part / p.whole) / step
        kept = stay**part
        left = (1.0 - kept) / (1.0 - stay) if stay < 1.0 else part
        for place in range(size):
            there = kept if place == p.state else left * pool[row + place * over]
            room[before + place * BINS + g] = there
            leaves = pool[p.keep + g] if (p.leaving >> place) & 1 else 0.0
            room[after + place * BINS + g] = there - leaves * there
    begin, end_of_step = first, first + step
    for g in range(first + 1, furthest + 1):
        leaves = pool[np.uint64(p.keep + g)]
        for end in range(size):
            total = 0.0
            row = chain.place + end * over + g - 1
            for place in range(size):
                total += room[np.uint64(after + place * BINS + begin)] * pool[np.uint64(row)]
                row += (size + chain.moves) * over
            room[np.uint64(before + end * BINS + g)] = total
            if (p.leaving >> end) & 1:
                total -= leaves * total
            room[np.uint64(after + end * BINS + g)] = total
        if g == end_of_step:
            begin, end_of_step = g, g + step
    return first, left


@inner
def add_rows(chain, p, sources, members, pool, room, first, left, furthest, step):
    """Fill the rows of the sources that are no row of a state: sums of states, moves of a step, lapses.

    Each is a sum of products of a row of states with one of the pool: ones, expected moves, shares that lapse.
    """
    size, over = chain.states, chain.over
    wide = (size + chain.moves) * over
    for n in range(p.sources, p.sources_end):
        source = sources[np.uint64(n)]
        if source.end - source.begin == 1 and members[np.uint64(source.begin)] < 2 * size:
            continue
        to = (ROOM + 2 * size + n - p.sources) * BINS
        for g in range(p.k, furthest + 1):
            room[np.uint64(to + g)] = 0.0
        for q in range(source.begin, source.end):
            member = members[np.uint64(q)]
            column = chain.place + (member - size) * over - 1
            if 2 * size <= member < 2 * size + chain.moves and first <= furthest:
                room[to + first] += left * pool[column + p.state * wide + first]
            for place in range(size if member >= 2 * size else 1):
                if member < 2 * size:
                    one, row, g, hop = (ROOM + member) * BINS, ONES, p.k, 1
                elif member == 2 * size + chain.moves:
                    one, row, g, hop = (ROOM + place) * BINS, p.keep, p.k + 1, 1
                    if (p.leaving >> place) & 1 == 0:
                        continue
                else:
                    one, row = (ROOM + size + place) * BINS - step, column + place * wide
                    g, hop = first + step, step
                while g <= furthest:
                    room[np.uint64(to + g)] += room[np.uint64(one + g)] * pool[np.uint64(row + g)]
                    g += hop


@compiled
def value_policies(order, policies, tables, rules, results):
    """Value the policies: parts, rounded results, and expected cash flows per account and month.

    policies and the tables' matrices are in the order of calculation; order: the place of each policy in the
    results.
    """
    segments, survivals = unowned(tables.segments), unowned(tables.survivals)
    pool, money, whole = unowned(tables.pool), unowned(tables.money), unowned(tables.whole)
    flows, lives = unowned(results.flows), unowned(results.lives)
    room, filled = unowned(results.room), unowned(results.filled)
    firsts, counts = unowned(results.firsts), unowned(results.counts)
    chains, sources, members = unowned(tables.chains), unowned(tables.sources), unowned(tables.members)
    survived, beside, persisting = np.int64(-1), np.int64(-1), np.int64(-1)
    for j in range(len(order)):
        i = np.uint64(order[np.uint64(j)])
        if results.reason[i] != 0:
            continue
        p = policies[np.uint64(j)]
        new = p.survival != survived or p.second != beside
        stand(lives[s.FIRST], survivals[np.uint64(p.survival)], pool, p, rules)
        beyond = outlives(lives[s.FIRST], p)
        if p.second == s.NOBODY:
            lives[s.FIRST].alive = 1.0
            beyond = False
        alive = lives[s.FIRST].alive
        if p.second >= 0:
            stand(lives[s.SECOND], survivals[np.uint64(p.second)], pool, p, rules)
            stand_together(lives, pool, room, p, new, rules)
            beyond = beyond or outlives(lives[s.SECOND], p)
            alive = lives[s.JOINT].alive
        if p.chain >= 0:
            alive, beyond = stand_in_states(lives, chains[np.uint64(p.chain)], p, sources, members)
        inforce = persistency_at(p, pool, rules)
        if new or p.held != persisting:
            survived, beside, persisting = p.survival, p.second, p.held
            for kind in range(3 * KINDS if p.second >= 0 else KINDS):
                filled[kind, 0] = filled[kind, 1] = 0
        if beyond or not alive > 0.0 or not inforce > 0.0:
            results.reason[i] = _TABLE if beyond else _NO_SURVIVAL
            continue
        today = p.part == 0
        # Unsigned, which spares a look for negative places.
        begin, behind = np.uint64(p.segments), np.uint64(p.segments_end)
        reason = 0
        going = False
        for n in range(begin, behind):
            stream = segments[n]
            reason, firsts[n - begin], counts[n - begin], lasts = extent(
                stream, whole, j, p, lives[np.uint64(stream.life)], rules
            )
            if reason != 0:
                results.fault[i] = n
                break
            if stream.own == 1 and (lasts or (today and due_today(stream, whole, j, p, rules)[0])):
                going = True
        if reason == 0 and not going:
            reason = _MATURED
        if reason != 0:
            results.reason[i] = reason
            continue
        if p.chain >= 0 and p.sources_end > p.sources:
            furthest = p.k
            for n in range(begin, behind):
                stream = segments[n]
                if stream.life > s.JOINT and counts[n - begin] > 0:
                    last = firsts[n - begin] + (counts[n - begin] - 1) * apart(stream, whole, j, rules)
                    furthest = max(furthest, last)
            chain = chains[np.uint64(p.chain)]
            step = np.int64(rules.step)
            ended, left = occupy(chain, p, pool, room, furthest, step)
            add_rows(chain, p, sources, members, pool, room, ended, left, furthest, step)
        furthest = p.k
        benefits, expenses, premiums = 0.0, 0.0, 0.0
        for n in range(begin, behind):
            stream = segments[n]
            first, count = firsts[n - begin], counts[n - begin]
            if count > 0:
                furthest = max(furthest, first + (count - 1) * apart(stream, whole, j, rules))
            if count > 0 or today:
                value = value_segment(
                    stream,
                    p,
                    lives[np.uint64(stream.life)],
                    room if stream.life >= s.JOINT else pool,
                    whole,
                    j,
                    money,
                    pool,
                    inforce,
                    first,
                    count,
                    today,
                    rules,
                    flows,
                    room,
                    filled,
                )
                benefits += stream.benefits * value
                expenses += stream.expenses * value
                premiums += stream.premiums * value
        results.months[0] += (furthest - p.k) * np.int64(rules.sign)
        keep_results(i, benefits, expenses, premiums, rules.minor, results)


@inlined
def keep_results(i, benefits, expenses, premiums, minor, results):
    """Keep a policy's results, and round them to the minor unit, once."""
    results.parts[i, 0], results.parts[i, 1], results.parts[i, 2] = benefits, expenses, premiums
    if not max(abs(benefits), abs(expenses), abs(premiums)) * minor < LARGEST_RESULT:
        results.reason[i] = _NOT_FINITE
        return
    results.minor[i, 0] = np.int64(np.rint((benefits + expenses - premiums) * minor))
    results.minor[i, 1] = np.int64(np.rint(benefits * minor))
    results.minor[i, 2] = np.int64(np.rint(expenses * minor))
    results.minor[i, 3] = np.int64(np.rint(premiums * minor))


@inlined
def value_segment(
    stream, p, life, lives, whole, j, money, pool, inforce, first, count, today, rules, flows, room, filled
):
    """Value of a segment for one policy; life: whose survival it depends on, and lives the array that holds it."""
    amount = rules.sign * stream.factor
    if stream.amount >= 0:
        amount *= money[np.uint64(stream.amount), np.uint64(j)]
    for _ in range(stream.power):
        amount *= entry(whole, stream.period, j) / 12.0
    if amount == 0.0:
        return 0.0
    # A payment that is too large to be rounded at once is paid in equal pieces.
    size = abs(amount) * rules.quantum * largest_relative(stream, whole, j, pool)
    pieces = np.int64(1)
    if size > FAST:
        last = p.k if count == 0 else first + (count - 1) * apart(stream, whole, j, rules)
        size = abs(amount) * rules.quantum * largest_so_far(stream, whole, j, pool, last, p.shift)
    if size > FAST:
        if size > FAST * PIECES:
            return BEYOND
        pieces = np.int64(np.ceil(size / FAST))
        amount /= pieces
    value = 0.0
    for _ in range(pieces):
        if today:
            due, month = due_today(stream, whole, j, p, rules)
            if due:
                # Survival and discount do not come in; the payment is certain.
                paid = amount * pool[relative_place(stream, whole, j, month, p.k + p.shift)]
                if stream.life > s.JOINT:
                    paid *= room[life.living + p.k]
                flows[stream.account * BINS + max(0, p.k + p.shift)] += quanta(paid * rules.quantum)
                value += paid
        if count > 0:
            if stream.when == s.DEATH or stream.when == s.LAPSE:
                value += value_moves(
                    stream, p, life, lives, whole, j, pool, inforce, first, count, amount, rules, flows, room, filled
                )
            elif stream.when == s.THIRD_TERM:
                value += third_term(stream, p, life, whole, j, pool, inforce, first, count, amount, rules)
            else:
                value += value_payments(
                    stream, p, life, lives, whole, j, pool, inforce, first, count, amount, rules, flows, room, filled
                )
    return value


@inlined
def persistency_at(p, pool, rules):
    """Persistency at T: that of the last point, or on the way to the next where lapses spread over a step."""
    held = pool[p.held + p.k]
    if rules.dependent == 1:
        held -= p.part / p.whole * (held - pool[p.held + p.k + 1])
    return held


@inner
def apart(stream, whole, j, rules):
    """Months between the points of a segment."""
    if stream.when == s.ONCE:
        return np.int64(1)
    if stream.when == s.DEATH or stream.when == s.LAPSE:
        return np.int64(rules.step)
    if stream.window == s.WHOLE_YEARS:
        return np.int64(12)
    return entry(whole, stream.period, j)


@inlined
def value_payments(stream, p, life, lives, whole, j, pool, inforce, first, count, amount, rules, flows, room, filled):
    """Value of payments while alive, for certain, or guaranteed, at their own dates after T."""
    there = life.alive * inforce
    period = apart(stream, whole, j, rules)
    start = entry(whole, stream.start, j)
    month = first
    if stream.when == s.ARREARS:
        month = first - period
    elif stream.when == s.ONCE:
        month = max(first - 1, start if stream.clock == 0 else 0)
    calendar = first + p.shift
    relative = relative_place(stream, whole, j, month, calendar)
    discount = p.payment + first - p.k
    flow = stream.account * BINS + max(0, calendar)
    alive = stream.cover == s.ALIVE or stream.cover == s.AFTER_GUARANTEE
    # Payments that are not in advance come before the lapses at the end of a step.
    before = 0 if rules.dependent == 1 else stream.before
    if alive:
        amount /= there
    elif stream.cover == s.GUARANTEED and start > p.k:
        if start > life.over:  # nobody lives to see its start
            return 0.0
        amount *= lives[life.living + start] * pool[p.held + start] / there
    if period > 1 or count < 4:
        place, held = (life.living + first, p.held + first - before) if alive else (ONES, ONES)
        return p.payment_accrued * sum_apart(
            lives if alive else pool,
            pool,
            place,
            held,
            relative,
            discount,
            0.0,
            1.0,
            flows,
            flow,
            count,
            period,
            amount,
            rules.quantum,
        )
    weight = CERTAINLY * BINS
    if stream.life > s.JOINT:
        weight = life.living + first
    elif alive:
        kind = stream.life * KINDS + (AFTER if before == 0 else BEFORE)
        weight = weights(kind, lives, pool, life.living, p.held - before, first, count, filled, room)
    return p.payment_accrued * sum_monthly(room, weight, pool, relative, discount, flows, flow, count, amount, rules)


@inlined
def value_moves(stream, p, life, lives, whole, j, pool, inforce, first, count, amount, rules, flows, room, filled):
    """Value of payments on death or lapse, step by step; the broken first step on its own."""
    step = rules.step
    death = stream.when == s.DEATH
    # Deaths are the difference of survival; lapses fall on the survivors, or on the mean where they spread.
    a, b, kind = 0.0, 1.0, LAPSING
    held, discount, accrued = p.lapsing, p.payment + first - p.k, p.payment_accrued
    calendar = first + p.shift
    if death:
        a, b, kind = 1.0, -1.0, DYING
        held, discount, accrued = p.dead, p.claim + first - p.k, p.claim_accrued
    elif rules.dependent == 1:
        a, b, kind = 0.5, 0.5, SPREAD
    if stream.life > s.JOINT:
        # The row holds the moves themselves.
        a, b, held = 0.0, 1.0, np.int64(ONES)
    amount /= life.alive * inforce
    relative = relative_place(stream, whole, j, first - step, first + p.shift)
    claim_first = p.claim_first if death else 0
    claim_shift = p.claim_shift if death else 0
    value = 0.0
    if first - step <= p.k:
        share = pool[held + first]
        if stream.life > s.JOINT:
            share = 1.0
        elif death and rules.dependent == 1:
            share = 0.5 * (inforce + pool[p.held + first])
        elif not death:
            share = inforce - pool[p.held + first]
        x = (a * life.alive + b * lives[life.living + first]) * share * pool[relative]
        paid = x * amount * rules.quantum
        flows[stream.account * BINS + max(0, calendar + claim_first)] += quanta(paid)
        value = amount * x * pool[discount]
        count -= 1
        first, calendar, discount = first + step, calendar + step, discount + step
        relative += step if relative != ONES else 0
    if count <= 0:
        return accrued * value
    flow = stream.account * BINS + max(0, calendar + claim_shift)
    if step > 1 or count < 4:
        value += sum_apart(
            lives,
            pool,
            life.living + first,
            held + first,
            relative,
            discount,
            a,
            b,
            flows,
            flow,
            count,
            step,
            amount,
            rules.quantum,
        )
        return accrued * value
    if stream.life > s.JOINT:
        weight = life.living + first
    else:
        weight = weights(stream.life * KINDS + kind, lives, pool, life.living, held, first, count, filled, room)
    value += sum_monthly(room, weight, pool, relative, discount, flows, flow, count, amount, rules)
    return accrued * value


@inner
def third_term(stream, p, life, whole, j, pool, inforce, first, count, amount, rules):
    """Third term of Woolhouse's formula: for each year, (mu + delta) at its start less that at its end."""
    before = 0 if rules.dependent == 1 else stream.before
    there = life.alive * inforce
    total = 0.0
    for n in range(count):
        g = first + 12 * n
        level = pool[relative_place(stream, whole, j, g, g)]
        total += level * (
            inclination(p, life, pool, there, g, before) - inclination(p, life, pool, there, g + 12, before)
        )
    return p.payment_accrued * amount * total


@inner
def inclination(p, life, pool, there, g, before):
    """L P v (mu + delta) at a point, over L(T) P(T); the forces from the years on both sides of the point."""
    living = life.living + g
    here = pool[living] if g <= life.over else 0.0
    if here <= 0.0:
        return 0.0
    after = here / pool[living + 12] if g + 12 <= life.over and pool[living + 12] > 0.0 else 0.0
    earlier = pool[living - 12] / here if g >= 12 else 0.0
    mortality = 0.0
    if earlier > 0.0 and after > 0.0:
        mortality = np.log(earlier * after) / 2.0
    elif earlier > 0.0 or after > 0.0:
        mortality = np.log(max(earlier, after))
    n = p.payment + g - p.k
    # With a part of a month passed, the point twelve months on lies less than a year away.
    if g - p.k > 12 or (g - p.k == 12 and p.part == 0):
        interest = np.log(pool[n - 12] / pool[n + 12]) / 2.0
    else:
        interest = np.log(pool[n] / pool[n + 12])
    share = 1.0 if g == p.k and p.part == 0 else here * pool[p.held + g - before] / there
    return share * pool[n] * (mortality + interest)


@compiled
def add_totals(group, reason, minor, totals):
    """Add money in minor units to the totals (group, 1 + columns) of the valued policies, counting them first."""
    for i in range(len(group)):
        if reason[i] == 0:
            totals[group[i], 0] += 1
            for column in range(minor.shape[1]):
                totals[group[i], 1 + column] += minor[i, column]


@compiled
def control_sums(amounts, reason, minor, sums):
    """Add amounts in minor units to three sums: all, valued, exceptions. What nobody could mean counts as 0."""
    for i in range(len(amounts)):
        if abs(amounts[i]) <= 1e12:
            whole = np.int64(np.rint(amounts[i] * minor))
            sums[0] += whole
            sums[1 if reason[i] == 0 else 2] += whole


@compiled
def sort_by(keys, size, order, again):
    """Put ``order`` in order of keys from 0 to size - 1; equal keys keep their order. again: room for it."""
    starts = np.zeros(size + 1, np.int64)
    for key in keys:
        starts[key + 1] += 1
    for key in range(size):
        starts[key + 1] += starts[key]
    for i in order:
        again[starts[keys[i]]] = i
        starts[keys[i]] += 1
    for i in range(len(order)):
        order[i] = again[i]
