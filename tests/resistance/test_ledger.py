"""The ledger of statistical uncertainty."""

import pytest

from calibrate.errors import InputError
from calibrate.resistance import LedgerEntry, ledger

PATH = "resistance.screws to rules.pull_out"


def test_one_allowance_on_each_path_passes():
    found = ledger(
        [
            LedgerEntry("values.R_k", "k_n", PATH, 8),
            LedgerEntry("variables.theta", "none", PATH, 8),
            LedgerEntry("variables.f_u", "predictive variable", "records.coupons to rules.pull_out", 12),
        ]
    )
    assert found.doubts == ()
    assert found.paths == (PATH, "records.coupons to rules.pull_out")
    assert [e.subject for e in found.on(PATH)] == ["values.R_k", "variables.theta"]


def test_counting_twice_names_both_and_stops():
    entries = [
        LedgerEntry("values.R_k", "k_n", PATH, 8),
        LedgerEntry("variables.theta", "predictive variable", PATH, 8),
    ]
    with pytest.raises(InputError) as caught:
        ledger(entries)
    assert str(caught.value) == (
        "On the path resistance.screws to rules.pull_out the small number of tests (n = 8) is allowed for twice: by a "
        "factor k_n for the number of tests in 'values.R_k' and by a predictive distribution in 'variables.theta'. "
        "Keep one, and take plain estimates for the rest."
    )


def test_all_paths_that_count_twice_are_told_at_once():
    entries = [
        LedgerEntry("a", "C_P", "first", 5), LedgerEntry("b", "floor on V", "first", 5),
        LedgerEntry("c", "k_n", "second", 6), LedgerEntry("d", "k_n", "second", 6),
        LedgerEntry("e", "C_P", "second", 6), LedgerEntry("f", "k_n", "third", 6),
    ]  # fmt: skip
    with pytest.raises(InputError) as caught:
        ledger(entries)
    first, second = caught.value.problems
    assert "the path first" in first.message
    assert "twice" in first.message
    assert "three times" in second.message


def test_the_same_entry_given_again_is_one():
    entry = LedgerEntry("values.R_k", "k_n", PATH, 8)
    assert ledger([entry, entry]).doubts == ()


def test_one_published_procedure_counts_once_but_is_told():
    both = [
        LedgerEntry("phi", "C_P", PATH, 5, "AISI S100"),
        LedgerEntry("phi", "floor on V", PATH, 5, "AISI S100"),
    ]
    (doubt,) = ledger(both).doubts
    assert doubt.code == "one-procedure-two-allowances"
    with pytest.raises(InputError, match="three times"):
        ledger([*both, LedgerEntry("variables.theta", "predictive variable", PATH, 5)])
    with pytest.raises(InputError, match="twice"):
        ledger([both[0], LedgerEntry("another", "C_P", PATH, 5, "AISI S100")])


def test_few_tests_allowed_for_nowhere_are_doubted():
    few, many = (LedgerEntry("variables.theta", "none", PATH, n) for n in (29, 30))
    (doubt,) = ledger([few]).doubts
    assert (doubt.code, doubt.where) == ("few-tests-not-allowed-for", "variables.theta")
    assert "only 29" in doubt.message
    assert ledger([many]).doubts == ()
    assert ledger([]).doubts == ()


def test_wrong_entries_are_refused():
    with pytest.raises(InputError, match=r"got 'kn' for 'x'"):
        LedgerEntry("x", "kn", PATH, 5)
    with pytest.raises(InputError, match="rests on 0 tests"):
        LedgerEntry("x", "k_n", PATH, 0)
