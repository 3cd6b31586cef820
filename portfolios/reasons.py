"""The closed list of reasons why a policy is not valued."""

from __future__ import annotations

from enum import IntEnum


class Reason(IntEnum):
    """Why a policy is an exception. The numbers are for compiled loops; files and reports carry the words."""

    FINE = 0
    IDENTIFIER_MISSING = 1
    IDENTIFIER_UNREADABLE = 2
    IDENTIFIER_NOT_UNIQUE = 3
    PRODUCT_UNKNOWN = 4
    NOT_IN_FORCE = 5
    DATE_MISSING = 6
    DATE_OUT_OF_RANGE = 7
    COMMENCED_BEFORE_BIRTH = 8
    COMMENCES_LATER = 9
    NUMBER_MISSING = 10
    NUMBER_NOT_FINITE = 11
    NUMBER_NEGATIVE = 12
    NUMBER_OUT_OF_RANGE = 13
    FREQUENCY_UNKNOWN = 14
    NOT_WHOLE_MONTHS = 15
    LIVES_UNKNOWN = 16
    STATE_UNKNOWN = 18
    # The following are found by the projection.
    NOT_WHOLE_YEARS = 20
    NOT_WHOLE_PERIODS = 21
    END_BEFORE_START = 22
    MATURED = 23
    NO_RULE_FITS = 24
    AGE_OUTSIDE_TABLE = 25
    TABLE_ENDS_EARLY = 26
    NO_SURVIVAL = 27
    TOO_LONG = 28
    RESULT_NOT_FINITE = 29

    @property
    def words(self) -> str:
        """Short text for lists and reports."""
        return _WORDS[self][0]

    @property
    def rule(self) -> str:
        """The rule that the policy breaks, in a sentence."""
        return _WORDS[self][1]


_WORDS: dict[Reason, tuple[str, str]] = {
    Reason.FINE: ("fine", ""),
    Reason.IDENTIFIER_MISSING: ("identifier missing", "every policy needs an identifier"),
    Reason.IDENTIFIER_UNREADABLE: ("identifier not readable", "an identifier must be UTF-8 text"),
    Reason.IDENTIFIER_NOT_UNIQUE: (
        "identifier not unique",
        "an identifier must occur once in the extract; none of the policies that share it is valued",
    ),
    Reason.PRODUCT_UNKNOWN: ("product not known", "the product must be the code of one of the run's designs"),
    Reason.NOT_IN_FORCE: ("status not in force", "the status must be one of the run's 'in_force' values"),
    Reason.DATE_MISSING: ("date missing", "the date must be there"),
    Reason.DATE_OUT_OF_RANGE: ("date out of range", "a date must lie in the years 1800 to 2200"),
    Reason.COMMENCED_BEFORE_BIRTH: ("commenced before birth", "the birth must not be after the commencement"),
    Reason.COMMENCES_LATER: (
        "commences after the valuation date",
        "the commencement must not be after the valuation date",
    ),
    Reason.NUMBER_MISSING: ("amount missing", "the product's design uses this column, so it must be there"),
    Reason.NUMBER_NOT_FINITE: ("amount not a number", "the value must be a finite number"),
    Reason.NUMBER_NEGATIVE: ("amount negative", "the value must not be negative"),
    Reason.NUMBER_OUT_OF_RANGE: ("amount out of range", "the value must lie in the column's range"),
    Reason.FREQUENCY_UNKNOWN: ("frequency not known", "payments a year must be 1, 2, 4 or 12"),
    Reason.NOT_WHOLE_MONTHS: (
        "duration not in whole months",
        "a duration in years must be a whole number of months",
    ),
    Reason.LIVES_UNKNOWN: ("lives not known", "lives of a contract on two lives must be both, first, second or none"),
    Reason.STATE_UNKNOWN: ("state not known", "the state must be one of the states of the product's design, or dead"),
    Reason.NOT_WHOLE_YEARS: (
        "duration not in whole years",
        "a stream paid on a move needs durations of whole years where the step is a year",
    ),
    Reason.NOT_WHOLE_PERIODS: (
        "term not in whole payment periods",
        "the time from a stream's start to its end must be a whole number of its payment periods",
    ),
    Reason.END_BEFORE_START: ("end before start", "a stream must not end before it starts"),
    Reason.MATURED: ("matured", "a policy must have something still to come after the valuation date"),
    Reason.NO_RULE_FITS: ("no rule fits", "the basis must have a rule that fits the policy"),
    Reason.AGE_OUTSIDE_TABLE: (
        "age outside the table",
        "the rate table must hold the age at commencement and at the valuation date",
    ),
    Reason.TABLE_ENDS_EARLY: (
        "table ends too early",
        "the rate table must reach the end of the policy's streams, or end with rate 1 or be declared closed",
    ),
    Reason.NO_SURVIVAL: (
        "no survival to the valuation date",
        "survival and persistency to the valuation date must be above zero under the basis",
    ),
    Reason.TOO_LONG: ("contract too long", "a contract may run for 120 years"),
    Reason.RESULT_NOT_FINITE: (
        "result not a number, or too large",
        "the value must be a finite amount, in minor units below 1,000,000,000,000,000",
    ),
}
