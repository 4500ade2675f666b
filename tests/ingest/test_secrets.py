from __future__ import annotations

import os
import stat

import pytest

from analysis.errors import InvalidInputError
from ingest.secrets import MissingSecretError, read_secret, secret_path, write_secret


@pytest.fixture
def site_file(tmp_path):
    return tmp_path / "site.yaml"


def mode(path):
    return stat.S_IMODE(path.stat().st_mode)


def test_what_is_kept_comes_back_and_only_its_owner_can_read_it(site_file):
    before = os.umask(0)
    try:
        path = write_secret("broker", "pässword ", site_file=site_file)
    finally:
        os.umask(before)
    assert read_secret("broker", site_file=site_file) == "pässword "
    assert mode(path) == 0o600
    assert mode(path.parent) == 0o700
    assert path.parent == site_file.parent / "secrets"


def test_a_new_value_replaces_the_old_and_leaves_nothing_else(site_file):
    for value in ("a long first value", "short"):
        path = write_secret("broker", value, site_file=site_file)
    assert read_secret("broker", site_file=site_file) == "short"
    assert [item.name for item in path.parent.iterdir()] == ["broker"]


def test_a_left_over_file_that_others_can_read_lends_its_rights_to_nothing(site_file):
    folder = site_file.parent / "secrets"
    folder.mkdir()
    (folder / "broker.new").write_text("half")
    (folder / "broker.new").chmod(0o644)
    assert mode(write_secret("broker", "right", site_file=site_file)) == 0o600


def test_one_that_is_not_set_says_how_to_set_it(site_file):
    with pytest.raises(MissingSecretError, match="'broker' is not set; set it with: euryhale secret set broker"):
        read_secret("broker", site_file=site_file)


@pytest.mark.parametrize("name", ["", "..", "../x", "a/b", "/etc/passwd", "A", "1a", "a.b", "a" * 41, "a\n", "a\0"])
def test_no_name_leads_out_of_the_folder(site_file, name):
    for act in (secret_path, read_secret):
        with pytest.raises(InvalidInputError, match="lower-case letters"):
            act(name, site_file=site_file)
    with pytest.raises(InvalidInputError):
        write_secret(name, "x", site_file=site_file)
    assert list(site_file.parent.iterdir()) == []
