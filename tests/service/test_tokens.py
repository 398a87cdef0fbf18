"""Links: for one purpose and one subject, for as long as stated, through changes of keys."""

from datetime import timedelta

import pytest

from service.errors import BadToken
from service.tokens import LIFETIMES, Tokens
from tests.builders import NOW

OLD, NEW = "old-" + "k" * 40, "new-" + "k" * 40


def test_a_token_gives_its_subject_back() -> None:
    tokens = Tokens([NEW])
    for purpose in LIFETIMES:
        assert tokens.read(purpose, tokens.make(purpose, "s1", NOW), NOW) == "s1"


def test_a_token_is_good_for_one_purpose_only() -> None:
    tokens = Tokens([NEW])
    for made in LIFETIMES:
        for other in LIFETIMES.keys() - {made}:
            with pytest.raises(BadToken):
                tokens.read(other, tokens.make(made, "s1", NOW), NOW)


def test_an_altered_token_is_refused_at_every_character() -> None:
    tokens = Tokens([NEW])
    good = tokens.make("show", "s1", NOW)
    for at in range(len(good) - 1):  # the last character of base64 holds spare bits
        altered = good[:at] + ("A" if good[at] != "A" else "B") + good[at + 1 :]
        with pytest.raises(BadToken, match="newest digest"):
            tokens.read("show", altered, NOW)


@pytest.mark.parametrize("token", ["", "s1", ".", "a.b", "é", "WyJzMSIsMV0", "x" * 5000])
def test_what_is_no_token_is_refused(token: str) -> None:
    with pytest.raises(BadToken):
        Tokens([NEW]).read("show", token, NOW)


def test_a_token_cut_short_or_lengthened_is_refused() -> None:
    good = Tokens([NEW]).make("show", "s1", NOW)
    for broken in (good[:-2], good[1:], good + "x", good + ".x"):
        with pytest.raises(BadToken):
            Tokens([NEW]).read("show", broken, NOW)


def test_a_link_to_show_ends_after_its_stated_days() -> None:
    tokens = Tokens([NEW])
    token, last = tokens.make("show", "s1", NOW), NOW + timedelta(days=120)
    assert tokens.read("show", token, last) == "s1"
    with pytest.raises(BadToken, match="more than 120 days old"):
        tokens.read("show", token, last + timedelta(seconds=1))


def test_a_way_out_works_for_years_and_through_a_change_of_keys() -> None:
    token = Tokens([OLD]).make("unsubscribe", "s1", NOW)
    assert Tokens([NEW, OLD]).read("unsubscribe", token, NOW + timedelta(days=3650)) == "s1"


def test_the_newest_key_signs_and_a_key_taken_away_no_longer_reads() -> None:
    token = Tokens([NEW, OLD]).make("show", "s1", NOW)
    assert Tokens([NEW]).read("show", token, NOW) == "s1"
    with pytest.raises(BadToken):
        Tokens([OLD]).read("show", token, NOW)


def test_a_purpose_nobody_declared_is_a_fault_of_ours() -> None:
    tokens = Tokens([NEW])
    with pytest.raises(ValueError, match="no token purpose"):
        tokens.make("sign", "s1", NOW)
    with pytest.raises(ValueError, match="no token purpose"):
        tokens.read("sign", tokens.make("show", "s1", NOW), NOW)


@pytest.mark.parametrize("keys", [[], [""], ["short"], [NEW, "short"]])
def test_short_keys_are_refused(keys: list[str]) -> None:
    with pytest.raises(ValueError, match="32 characters"):
        Tokens(keys)


def test_a_token_holds_no_address() -> None:
    assert "@" not in Tokens([NEW]).make("unsubscribe", "s1", NOW)
