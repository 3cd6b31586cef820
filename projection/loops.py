"""The compiled loops: where each policy stands, and what each of its streams is worth.

Everything compiled lives in this one file, because a compiled function is kept on disk by the state of its own file
alone. Nothing here raises: a policy that cannot be valued gets a reason, and the others go on. Sums are taken in an
order that depends on the policy only. Letters as in the page of conventions: T valuation date, g a point in months
since commencement, k and f the whole months and the rest of the last one at T.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numba as nb
import numpy as np

from portfolios.reasons import Reason

from . import streams as s

BINS = s.LONGEST + 64
"""Calendar months that cash flows may fall in, from the month of T."""

MAGIC = 6755399441055744.0
"""1.5 * 2^52: adding and taking it away rounds a double to the nearest whole number, half to even."""

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

compiled = nb.njit(cache=True, nogil=True, error_model="numpy")


class Dates(NamedTuple):
    """Dates of a chunk's policies as days since 1970-01-01, and the reason against each (0: none)."""

    birth: Any
    commencement: Any
    reason: Any


class Places(NamedTuple):
    """Where each policy stands at T; one array each.

    k, part, whole: months passed, and part / whole of the next one; shift: calendar months from that of T to that of
    commencement; day: of the month of commencement; age, since, span: completed years at commencement, days since the last
    birthday, days from it to the next.
    """

    k: Any
    part: Any
    whole: Any
    shift: Any
    day: Any
    age: Any
    since: Any
    span: Any


class Curves(NamedTuple):
    """Rows that policies share.

    living: survival at points, one row after the other from living_at[row], living_count[row] of them; yearly and reached: rate q of each year of
    age and survival to its start, from yearly_at[row]; offset: years of age passed in the first of them at commencement; closed: whether nobody is left
    at the end; persistency, dead, lapsing: rows by point, one place in front for g = -1; payment, claim: discount factors of
    a payment at point k + n, and of a death claim of the step that ends there; relative: amounts by months.
    """

    living: Any
    living_at: Any
    living_count: Any
    yearly: Any
    reached: Any
    yearly_at: Any
    offset: Any
    closed: Any
    persistency: Any
    dead: Any
    lapsing: Any
    payment: Any
    claim: Any
    relative: Any
    ones: Any


class Policies(NamedTuple):
    """Per policy: cell, rows of its curves, and the matrices of slots (slot, policy)."""

    cell: Any
    mortality: Any
    lapse: Any
    discount: Any
    claim_shift: Any
    money: Any
    months: Any
    periods: Any
    changing: Any


class Rules(NamedTuple):
    """What holds for the whole run.

    step: months; outstanding: 1 if payments due on T are to come; fractions: 0 constant force, 1 uniform deaths, 2 Balducci;
    dependent: 1 for decrements uniform in their single tables; quantum: cash flows are rounded to whole multiples of 1 / quantum; minor:
    minor units in one of currency.
    """

    step: int
    outstanding: int
    fractions: int
    dependent: int
    quantum: float
    minor: float


class Results(NamedTuple):
    """Per policy: reason (0: valued), the stream at fault, parts in currency (3, n), and money in minor units (4, n).

    The rows of parts are benefits, expenses and premiums; those of minor the reserve and then the parts. flows: expected cash flows by line
    and calendar month, in quanta.
    """

    reason: Any
    fault: Any
    parts: Any
    minor: Any
    flows: Any


@compiled
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


@compiled
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


@compiled
def months_later(year, month, day, months):
    """Day count of the date so many months later; the month's last day where the day is missing."""
    index = year * 12 + month - 1 + months
    return day_count(index // 12, index % 12 + 1, day)


@compiled
def locate(dates, today, step, places):
    """Fill the places of all policies that have no reason against them yet."""
    ty, tm, _ = civil(today)
    for i in range(len(dates.reason)):
        if dates.reason[i] != 0:
            continue
        cy, cm, cd = civil(np.int64(dates.commencement[i]))
        shift = (cy - ty) * 12 + cm - tm
        k = -shift // step * step
        if months_later(cy, cm, cd, k) > today:
            k -= step
        last = months_later(cy, cm, cd, k)
        whole = months_later(cy, cm, cd, k + step) - last
        passed = (today - last) * step
        places.k[i] = k + passed // whole
        places.part[i] = passed % whole
        places.whole[i] = whole
        places.shift[i] = shift
        places.day[i] = cd
        by, bm, bd = civil(np.int64(dates.birth[i]))
        age = cy - by
        birthday = day_count(cy, bm, bd)
        if birthday > dates.commencement[i]:
            age -= 1
            birthday = day_count(cy - 1, bm, bd)
        places.age[i] = age
        places.since[i] = dates.commencement[i] - birthday
        places.span[i] = day_count(by + age + 1, bm, bd) - birthday


@compiled
def months_to_age(dates, age, step, months):
    """Fill in the months from commencement to the first due date on or after a birthday, at least 0."""
    for i in range(len(dates.reason)):
        if dates.reason[i] != 0:
            months[i] = 0
            continue
        cy, cm, cd = civil(np.int64(dates.commencement[i]))
        by, bm, bd = civil(np.int64(dates.birth[i]))
        g = (by + age - cy) * 12 + bm - cm
        if months_later(cy, cm, cd, g) < day_count(by + age, bm, bd):
            g += 1
        months[i] = max(0, -(-g // step) * step)


@compiled
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
def fill_living(yearly, reached, offset, rule, living):
    """Fill a row of survival from commencement at points g = 0, 1 ..., given the rates of the years of age."""
    base = fraction_survived(yearly[0], offset, rule)
    for g in range(len(living)):
        if offset == 0.0:
            year, part = g // 12, (g % 12) / 12.0
        else:
            passed = offset + g / 12.0
            year = np.int64(np.floor(passed))
            part = passed - year
        if year >= len(yearly):
            living[g] = reached[len(yearly)] / base
        else:
            living[g] = reached[year] * fraction_survived(yearly[year], part, rule) / base


@compiled
def survival_at(curves, row, months, rule):
    """Survival L from commencement to any real number of months later."""
    at = curves.yearly_at[row]
    offset = curves.offset[row]
    years = curves.yearly_at[row + 1] - at - 1
    base = fraction_survived(curves.yearly[at], offset, rule)
    passed = offset + months / 12.0
    year = np.int64(np.floor(passed))
    if year >= years:
        return curves.reached[at + years] / base
    return curves.reached[at + year] * fraction_survived(curves.yearly[at + year], passed - year, rule) / base


@compiled
def sum_payments(occupancy, persistency, relative, discount, flow, count, period, amount, quantum, scratch):
    """Sum of a stream's payments at every ``period``-th place of the rows; adds them to the cash flows.

    The rows start at the first payment. The sum runs in four lanes, payment by payment, and so always in the same order.
    """
    scale = amount * quantum
    if period == 1:
        for j in range(count):
            x = occupancy[j] * persistency[j] * relative[j]
            flow[j] += (x * scale + MAGIC) - MAGIC
            scratch[j] = x * discount[j]
    else:
        place = np.uint64(0)
        hop = np.uint64(period)
        for j in range(count):
            x = occupancy[place] * persistency[place] * relative[place]
            flow[place] += (x * scale + MAGIC) - MAGIC
            scratch[j] = x * discount[place]
            place += hop
    return amount * add_up(scratch, count)


@compiled
def sum_moves(before, after, a, b, weight, relative, discount, flow, count, step, amount, quantum, scratch):
    """The same for payments on a move: occupancy is a * before + b * after, at the two ends of each step."""
    scale = amount * quantum
    if step == 1:
        for j in range(count):
            x = (a * before[j] + b * after[j]) * weight[j] * relative[j]
            flow[j] += (x * scale + MAGIC) - MAGIC
            scratch[j] = x * discount[j]
    else:
        place = np.uint64(0)
        hop = np.uint64(step)
        for j in range(count):
            x = (a * before[place] + b * after[place]) * weight[place] * relative[place]
            flow[place] += (x * scale + MAGIC) - MAGIC
            scratch[j] = x * discount[place]
            place += hop
    return amount * add_up(scratch, count)


@compiled
def add_up(values, count):
    """Sum of the first values in four lanes."""
    a = 0.0
    b = 0.0
    c = 0.0
    d = 0.0
    i = np.uint64(0)
    one = np.uint64(1)
    two = np.uint64(2)
    three = np.uint64(3)
    four = np.uint64(4)
    for _ in range(count // 4):
        a += values[i]
        b += values[i + one]
        c += values[i + two]
        d += values[i + three]
        i += four
    while i < np.uint64(count):
        a += values[i]
        i += one
    return (a + b) + (c + d)


@compiled
def first_due(start, period, least):
    """The first of start, start + period ... that is at least ``least``."""
    if start >= least:
        return start
    return start + -(-(least - start) // period) * period


@compiled
def extent(stream, i, k, exact, policies, curves, rules):
    """Reason, first point and number of points after T of a stream; the period follows from the stream.

    A payment due exactly on T is not among the points.
    """
    row = policies.mortality[i]
    over = curves.living_count[row] - 1
    start = np.int64(policies.months[stream.start, i]) if stream.start >= 0 else 0
    end = np.int64(policies.months[stream.end, i]) if stream.end >= 0 else over
    if start < 0 or end < 0:
        return _MONTHS, 0, 0
    if stream.end < 0:
        end = max(start, over)
        if not curves.closed[row] and stream.cover != s.CERTAIN:
            return _TABLE, 0, 0
    if end < start:
        return _ORDER, 0, 0
    if end > over and not curves.closed[row] and stream.cover != s.CERTAIN:
        return _TABLE, 0, 0
    low = max(start + stream.span_from, stream.clip_from)
    high = min(start + stream.span_to, stream.clip_to)
    when = stream.when
    if when == s.ONCE:
        month = max(start - 1, start if stream.clock == 0 else 0)
        inside = low <= month < high and start <= over
        return 0, start, 1 if start > k and inside else 0
    if when == s.DEATH or when == s.LAPSE:
        step = rules.step
        if start % step != 0 or (end % step != 0 and stream.end >= 0):
            return _YEARS, 0, 0
        first = (max(k // step * step, start, low) // step + 1) * step
        if low > max(k // step * step, start):
            first = first_due(start, step, low) + step
        last = min(end, over)
        if high + step - 1 < last:
            last = high + step - 1
        return 0, first, max(0, (last - first) // step + 1)
    period = np.int64(policies.periods[stream.period, i])
    if period <= 0 or (stream.whole == 1 and (end - start) % period != 0):
        return _PERIOD, 0, 0
    begin = start
    if stream.guarantee >= 0:
        guaranteed = np.int64(policies.months[stream.guarantee, i])
        if guaranteed < 0:
            return _MONTHS, 0, 0
        if guaranteed % period != 0:
            return _PERIOD, 0, 0
        if stream.cover == s.GUARANTEED:
            end = min(end, start + guaranteed)
        else:
            begin = start + guaranteed
    if stream.window != s.OWN_DATES:
        if stream.end >= 0 and (end - start) % 12 != 0:
            return _PERIOD, 0, 0
        turn = first_due(start, 12, k if exact and rules.outstanding else k + 1)
        if stream.window == s.BROKEN_YEAR:
            end = min(end, turn)
        else:
            begin = max(begin, turn)
            period = 12
    lag = period if when == s.ARREARS else 0
    month = first_due(start, period, max(begin, low, k + 1 - lag))
    stop = min(end - lag + 1 if lag else end, high)
    if stream.cover == s.ALIVE or stream.cover == s.AFTER_GUARANTEE:
        # The third term of Woolhouse's formula looks at both ends of a year.
        stop = min(stop, over + 1 - (12 if when == s.THIRD_TERM else lag))
    count = (stop - month + period - 1) // period if stop > month else 0
    return 0, month + lag, count


@compiled
def due_today(stream, i, k, policies):
    """Whether a stream has a payment exactly on T, and its relative month; only asked where T is a point."""
    start = np.int64(policies.months[stream.start, i]) if stream.start >= 0 else 0
    end = np.int64(policies.months[stream.end, i]) if stream.end >= 0 else s.FOR_EVER
    low = max(start + stream.span_from, stream.clip_from)
    high = min(start + stream.span_to, stream.clip_to)
    if stream.when == s.ONCE:
        due = start == k
        month = max(k - 1, start if stream.clock == 0 else 0)
    elif stream.when == s.DEATH or stream.when == s.LAPSE or stream.window == s.WHOLE_YEARS:
        return False, 0
    else:
        period = np.int64(policies.periods[stream.period, i])
        lag = period if stream.when == s.ARREARS else 0
        month = k - lag
        if stream.window == s.BROKEN_YEAR:
            end = min(end, first_due(start, 12, k))
        if stream.guarantee >= 0:
            turn = start + np.int64(policies.months[stream.guarantee, i])
            if stream.cover == s.GUARANTEED:
                end = min(end, turn)
            else:
                start = max(start, turn)
        due = start <= month < end and month <= end - lag and (month - start) % period == 0
    return due and low <= month < high, month


@compiled
def relative_row(stream, i, policies, curves, month, point, shift):
    """The row of relative amounts from the given month (or calendar month) on."""
    if stream.calendar >= 0:
        return curves.relative[stream.calendar][max(0, point + shift) :]
    if stream.relative < 0 and stream.changing < 0:
        return curves.ones
    clock = np.int64(policies.months[stream.start, i]) if stream.clock == 0 and stream.start >= 0 else 0
    row = stream.relative if stream.changing < 0 else np.int64(policies.changing[stream.changing, i])
    return curves.relative[row][max(0, month - clock) :]


@compiled
def value_policies(order, places, policies, curves, streams, ranges, rules, results):
    """Value the policies in the given order: parts, rounded results, and expected cash flows per line and month."""
    scratch = np.empty(s.LONGEST + 2)
    firsts = np.empty(len(streams) + 1, np.int64)
    counts = np.empty(len(streams) + 1, np.int64)
    for j in range(len(order)):
        i = order[j]
        if results.reason[i] != 0:
            continue
        begin = ranges[policies.cell[i], 0]
        end = ranges[policies.cell[i], 1]
        k = np.int64(places.k[i])
        f = places.part[i] / places.whole[i]
        row = policies.mortality[i]
        alive = survival_at(curves, row, k + f, rules.fractions)
        if not alive > 0.0 or not persistency_at(policies.lapse[i], k, f, curves, rules) > 0.0:
            results.reason[i] = _NO_SURVIVAL
            continue
        reason = 0
        going = False
        for n in range(begin, end):
            stream = streams[n]
            reason, firsts[n - begin], counts[n - begin] = extent(
                stream, i, k, places.part[i] == 0, policies, curves, rules
            )
            if reason != 0:
                results.fault[i] = n
                break
            if stream.own == 1 and (counts[n - begin] > 0):
                going = True
            if stream.own == 1 and rules.outstanding == 1 and places.part[i] == 0:
                going |= due_today(stream, i, k, policies)[0]
        if reason == 0 and not going:
            reason = _MATURED
        if reason != 0:
            results.reason[i] = reason
            continue
        value_one(i, k, f, alive, places, policies, curves, streams, begin, end, firsts, counts, rules, results, scratch)


@compiled
def value_one(i, k, f, alive, places, policies, curves, streams, begin, end, firsts, counts, rules, results, scratch):
    """Value one policy whose streams' extents are known."""
    step = rules.step
    held = persistency_at(policies.lapse[i], k, f, curves, rules)
    share = 1.0 / (alive * held)
    benefits = 0.0
    expenses = 0.0
    premiums = 0.0
    for n in range(begin, end):
        stream = streams[n]
        amount = stream.factor
        if stream.amount >= 0:
            amount *= policies.money[stream.amount, i]
        if stream.power > 0:
            period = np.int64(policies.periods[stream.period, i])
            amount *= period / 12.0
            if stream.power == 2:
                amount *= period / 12.0
        value = 0.0
        if rules.outstanding == 1 and places.part[i] == 0:
            value += value_today(stream, i, k, amount, places, policies, curves, rules, results.flows)
        first = firsts[n - begin]
        count = counts[n - begin]
        if count > 0 and amount != 0.0:
            if stream.when == s.DEATH or stream.when == s.LAPSE:
                value += value_moves(
                    stream, i, k, f, alive, held, first, count, amount, places, policies, curves, rules, results.flows, scratch
                )  # fmt: skip
            elif stream.when == s.THIRD_TERM:
                value += third_term(stream, i, k, first, count, amount * share, policies, curves)
            else:
                value += value_payments(
                    stream, i, k, share, first, count, amount, places, policies, curves, rules, results.flows, scratch
                )
        if stream.part == s.BENEFITS:
            benefits += value
        elif stream.part == s.EXPENSES:
            expenses += value
        else:
            premiums += value
    reserve = benefits + expenses - premiums
    if not max(abs(benefits), abs(expenses), abs(premiums)) * rules.minor < LARGEST_RESULT:
        results.reason[i] = _NOT_FINITE
        return
    results.parts[0, i] = benefits
    results.parts[1, i] = expenses
    results.parts[2, i] = premiums
    results.minor[0, i] = np.int64(np.rint(reserve * rules.minor))
    results.minor[1, i] = np.int64(np.rint(benefits * rules.minor))
    results.minor[2, i] = np.int64(np.rint(expenses * rules.minor))
    results.minor[3, i] = np.int64(np.rint(premiums * rules.minor))


@compiled
def persistency_at(row, k, f, curves, rules):
    """Persistency at T: that of the last step boundary, or on the way to the next where lapses spread over a step."""
    h = k // rules.step * rules.step
    held = curves.persistency[row, h + 1]
    if rules.dependent == 1:
        elapsed = (k - h + f) / rules.step
        held -= elapsed * (held - curves.persistency[row, h + 1 + rules.step])
    return held


@compiled
def value_today(stream, i, k, amount, places, policies, curves, rules, flows):
    """Value of a payment due exactly on T: no survival and no discount."""
    due, month = due_today(stream, i, k, policies)
    if not due:
        return 0.0
    x = amount * relative_row(stream, i, policies, curves, month, k, np.int64(places.shift[i]))[0]
    flows[stream.line, max(0, k + places.shift[i])] += (x * rules.quantum + MAGIC) - MAGIC
    return x


@compiled
def value_payments(stream, i, k, share, first, count, amount, places, policies, curves, rules, flows, scratch):
    """Value of payments while alive, for certain, or guaranteed, at their own dates after T."""
    period = np.int64(12)
    if stream.when == s.ONCE:
        period = np.int64(1)
    elif stream.window != s.WHOLE_YEARS:
        period = np.int64(policies.periods[stream.period, i])
    shift = np.int64(places.shift[i])
    month = first
    held = policies.lapse[i]
    if stream.when == s.ARREARS:
        month = first - period
    elif stream.when == s.ONCE:
        clock = np.int64(policies.months[stream.start, i]) if stream.clock == 0 and stream.start >= 0 else 0
        month = max(first - 1, clock)
    living = curves.living[curves.living_at[policies.mortality[i]] :]
    occupancy = curves.ones
    persistency = curves.ones
    if stream.cover == s.ALIVE or stream.cover == s.AFTER_GUARANTEE:
        occupancy = living[first:]
        # One place in front stands for g = -1; payments that are not in advance come before the lapses.
        persistency = curves.persistency[held][first + (1 if stream.when == s.ADVANCE else 0) :]
        amount *= share
    elif stream.cover == s.GUARANTEED:
        start = np.int64(policies.months[stream.start, i]) if stream.start >= 0 else 0
        if start > k:
            amount *= share * living[start] * curves.persistency[held, start + 1]
    relative = relative_row(stream, i, policies, curves, month, first, shift)
    discount = curves.payment[policies.discount[i]][first - k :]
    flow = flows[stream.line][max(0, first + shift) :]
    return sum_payments(
        occupancy, persistency, relative, discount, flow, count, period, amount, rules.quantum, scratch
    )


@compiled
def value_moves(stream, i, k, f, alive, held, first, count, amount, places, policies, curves, rules, flows, scratch):
    """Value of payments on death or lapse, step by step; the broken first step on its own."""
    step = rules.step
    shift = np.int64(places.shift[i])
    death = stream.when == s.DEATH
    moved = np.int64(policies.claim_shift[i]) if death else 0
    living = curves.living[curves.living_at[policies.mortality[i]] :]
    row = policies.lapse[i]
    weight = curves.dead[row] if death else curves.lapsing[row]
    discount = curves.claim[policies.discount[i]] if death else curves.payment[policies.discount[i]]
    flow = flows[stream.line]
    # Deaths are the difference of survival; lapses fall on the survivors, or on the mean where they spread.
    a, b = 0.0, 1.0
    if death:
        a, b = 1.0, -1.0
    elif rules.dependent == 1:
        a, b = 0.5, 0.5
    amount /= alive * held
    value = 0.0
    if first - step <= k:
        relative = relative_row(stream, i, policies, curves, first - step, first, shift)
        share = weight[first + 1]
        if death and rules.dependent == 1:
            share = 0.5 * (held + curves.persistency[row, first + 1])
        elif not death:
            share = held - curves.persistency[row, first + 1]
        x = (a * alive + b * living[first]) * share * relative[0]
        flow[max(0, first + shift + moved)] += (x * amount * rules.quantum + MAGIC) - MAGIC
        value = amount * x * discount[first - k]
        first += step
        count -= 1
    if count > 0:
        value += sum_moves(
            living[first - step :], living[first:], a, b, weight[first + 1 :],
            relative_row(stream, i, policies, curves, first - step, first, shift),
            discount[first - k :], flow[max(0, first + shift + moved) :], count, step, amount, rules.quantum, scratch,
        )  # fmt: skip
    return value


@compiled
def third_term(stream, i, k, first, count, amount, policies, curves):
    """Third term of Woolhouse's formula: for each year, (mu + delta) at its start less that at its end."""
    row = policies.mortality[i]
    living = curves.living[curves.living_at[row] :]
    held = curves.persistency[policies.lapse[i]]
    discount = curves.payment[policies.discount[i]]
    total = 0.0
    for n in range(count):
        g = first + 12 * n
        level = relative_row(stream, i, policies, curves, g, g, 0)[0]
        total += level * (
            living[g] * held[g + 1] * discount[g - k] * slope(row, g, k, discount, curves)
            - living[g + 12] * held[g + 12] * discount[g + 12 - k] * slope(row, g + 12, k, discount, curves)
        )
    return amount * total


@compiled
def slope(row, g, k, discount, curves):
    """Force of mortality plus force of interest at a point, from the years on both sides of it."""
    at = curves.yearly_at[row]
    year = g // 12
    years = curves.yearly_at[row + 1] - at - 1
    after = -np.log1p(-curves.yearly[at + year]) if year < years and curves.yearly[at + year] < 1.0 else 0.0
    before = -np.log1p(-curves.yearly[at + year - 1]) if year > 0 and curves.yearly[at + year - 1] < 1.0 else after
    n = g - k
    if n >= 12:
        force = np.log(discount[n - 12] / discount[n + 12]) / 2.0
    else:
        force = np.log(discount[n] / discount[n + 12])
    return (before + after) / 2.0 + force


@compiled
def add_totals(group, reason, minor, totals):
    """Add money in minor units to the totals (group, 1 + columns) of the valued policies, counting them first."""
    for i in range(len(group)):
        if reason[i] == 0:
            totals[group[i], 0] += 1
            for column in range(minor.shape[0]):
                totals[group[i], 1 + column] += minor[column, i]


@compiled
def sort_by(keys, size, order):
    """Fill ``order`` with the places of the keys, 0 to size - 1, in order of key; equal keys keep their order."""
    starts = np.zeros(size + 1, np.int64)
    for key in keys:
        starts[key + 1] += 1
    for key in range(size):
        starts[key + 1] += starts[key]
    for i in range(len(keys)):
        order[starts[keys[i]]] = i
        starts[keys[i]] += 1
