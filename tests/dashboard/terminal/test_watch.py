from __future__ import annotations

from pathlib import Path

import pytest

from dashboard.terminal.command import main, parser


def test_it_looks_for_the_site_file_here_and_answers_on_its_port():
    args = parser(["watch"]).parse_args(["watch"])
    assert (args.site, args.clock, args.health_port) == (Path("site.yaml"), "system", 8502)


@pytest.mark.parametrize("content", [None, b"\xff\xfe", b"nothing: here\n"])
def test_without_a_site_file_that_can_be_read_it_says_what_is_wrong(tmp_path, capsys, content):
    file = tmp_path / "site.yaml"
    if content is not None:
        file.write_bytes(content)
    assert main(["watch", "--site", str(file)]) == 1
    said = capsys.readouterr().err
    assert said.startswith("euryhale watch: ")
    assert "site.yaml" in said
    assert "Traceback" not in said
