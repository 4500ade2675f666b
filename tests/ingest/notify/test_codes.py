"""The code of a message: who it names, and what is not believed."""

from __future__ import annotations

import hashlib
import hmac

import pytest
from hypothesis import given
from hypothesis import strategies as st

from ingest.notify.codes import Code, CodeError, key_of, verified, written
from ingest.secrets import secret_path

KEY = b"0" * 64
NOW_US = 1_780_000_000_000_000
HOUR_US = 3_600_000_000
CODE = Code("ana", 1042, 3, NOW_US + HOUR_US)

people = st.from_regex(r"[a-z][a-z0-9]{0,10}(-[a-z0-9]{1,5}){0,2}", fullmatch=True)


@given(people, st.integers(1, 10**12), st.integers(1, 10**6), st.integers(1, 10_000))
def test_a_code_names_what_it_was_made_for(person, call_out, call, minutes):
    code = Code(person, call_out, call, NOW_US + minutes * 60_000_000)
    back = verified(f"  Going. {written(code, KEY).upper()}\n", KEY, now_us=NOW_US)
    assert back[:3] == code[:3]
    assert 0 <= code.expires_at_us - back.expires_at_us < 60_000_000


def test_the_seal_is_the_standard_librarys_hmac():
    text = written(CODE, KEY)
    minute = (CODE.expires_at_us // 60_000_000).to_bytes(4, "big")
    expected = hmac.new(KEY, b"ana|1042|3|" + minute, hashlib.sha256).digest()[:16]
    import base64

    assert base64.b32decode(text.split(".")[3].upper()) == minute + expected


@pytest.mark.parametrize("place", range(3))
def test_another_person_call_out_or_call_is_not_believed(place):
    parts = written(CODE, KEY).split(".")
    parts[place] = ("rui", "1043", "4")[place]
    with pytest.raises(CodeError) as caught:
        verified(".".join(parts), KEY, now_us=NOW_US)
    assert caught.value.reason == "wrong_seal"


@given(st.integers(0, 31), st.sampled_from("abcdefghijklmnopqrstuvwxyz234567"))
def test_a_changed_letter_of_the_seal_is_not_believed(place, letter):
    text = written(CODE, KEY)
    seal = text.rpartition(".")[2]
    if seal[place] == letter:
        return
    changed = f"{text.rpartition('.')[0]}.{seal[:place]}{letter}{seal[place + 1 :]}"
    with pytest.raises(CodeError):
        verified(changed, KEY, now_us=NOW_US)


def test_another_sites_code_is_not_believed():
    with pytest.raises(CodeError, match="wrong_seal"):
        verified(written(CODE, b"1" * 64), KEY, now_us=NOW_US)


def test_a_code_is_over_after_its_time():
    with pytest.raises(CodeError, match="expired"):
        verified(written(CODE, KEY), KEY, now_us=NOW_US + 2 * HOUR_US)


@given(st.text(max_size=300))
def test_whatever_comes_is_refused_with_words(text):
    with pytest.raises(CodeError):
        verified(text, KEY, now_us=NOW_US)


def test_the_key_is_made_once_and_only_its_owner_can_read_it(tmp_path):
    site_file = tmp_path / "site.yaml"
    key = key_of(site_file)
    assert len(key) == 64
    assert key_of(site_file) == key
    assert secret_path("answer-key", site_file=site_file).stat().st_mode & 0o777 == 0o600
