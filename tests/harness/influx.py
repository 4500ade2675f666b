"""A real InfluxDB on free ports of loopback: Debian's 1.6 server, behind nginx that gives it the v2 write address."""

from __future__ import annotations

import os
import shutil
import subprocess
import urllib.error
import urllib.parse
import urllib.request
from collections.abc import Iterator
from pathlib import Path

import pytest

from ingest.broker import free_port, is_listening
from tests.harness.process import wait_until

NGINX = """
daemon off; pid {folder}/nginx.pid; error_log {folder}/nginx.log; worker_processes 1;
events {{}}
http {{
  access_log off; client_body_temp_path {folder}/body; proxy_temp_path {folder}/proxy; fastcgi_temp_path {folder}/f;
  uwsgi_temp_path {folder}/u; scgi_temp_path {folder}/s; client_max_body_size 64m;
  map $arg_precision $v1prec {{ default n; ns n; us u; ms ms; s s; }}
  map $arg_bucket $v1db {{ "~^(?<d>[^%/]+)" $d; }}
  server {{
    listen 127.0.0.1:{front}; proxy_http_version 1.1; proxy_set_header Connection "";
    location = /api/v2/write {{ set $args "db=$v1db&precision=$v1prec"; rewrite ^ /write break;
      proxy_set_header Authorization ""; proxy_pass http://127.0.0.1:{back}; }}
    location / {{ proxy_set_header Authorization ""; proxy_pass http://127.0.0.1:{back}; }}
  }}
}}
"""
INFLUXD = """
reporting-disabled = true
bind-address = "127.0.0.1:{rpc}"
[meta]
  dir = "{folder}/meta"
[data]
  dir = "{folder}/data"
  wal-dir = "{folder}/wal"
  query-log-enabled = false
[http]
  bind-address = "127.0.0.1:{back}"
  log-enabled = false
[monitor]
  store-enabled = false
"""


class InfluxServer:
    """influxd and nginx in a folder; may be killed and restarted with its data."""

    def __init__(self, folder: Path) -> None:
        folder.mkdir(parents=True, exist_ok=True)
        self._folder = folder
        self._back, self._front, self._rpc = free_port(), free_port(), free_port()
        self._influxd: subprocess.Popen[bytes] | None = None
        self._nginx: subprocess.Popen[bytes] | None = None
        # Started by root, nginx would change to a user that cannot write in our folder.
        user = "user root;" if os.geteuid() == 0 else ""
        (folder / "nginx.conf").write_text(user + NGINX.format(folder=folder, front=self._front, back=self._back))
        (folder / "influxd.conf").write_text(INFLUXD.format(folder=folder, back=self._back, rpc=self._rpc))

    @property
    def url(self) -> str:
        return f"http://127.0.0.1:{self._front}"

    def start(self) -> None:
        with (self._folder / "servers.log").open("ab") as log:
            self._influxd = subprocess.Popen(
                ["influxd", "-config", str(self._folder / "influxd.conf")], stdout=log, stderr=log
            )
            if self._nginx is None:
                self._nginx = subprocess.Popen(
                    ["nginx", "-c", str(self._folder / "nginx.conf")], stdout=log, stderr=log
                )
        wait_until(lambda: is_listening("127.0.0.1", self._back), what="influxd to listen")
        wait_until(lambda: is_listening("127.0.0.1", self._front), what="nginx to listen")

    def make_database(self, name: str) -> None:
        body = urllib.parse.urlencode({"q": f"CREATE DATABASE {name}"}).encode()
        with urllib.request.urlopen(f"{self.url}/query", data=body, timeout=10) as answer:
            assert answer.status == 200

    def kill(self) -> None:
        """End the database as a power cut would; nginx goes on and answers 502."""
        assert self._influxd is not None
        self._influxd.kill()
        self._influxd.wait()

    def stop(self) -> None:
        for process in (self._influxd, self._nginx):
            if process is not None and process.poll() is None:
                process.terminate()
                process.wait(30)


@pytest.fixture
def influx(tmp_path: Path) -> Iterator[InfluxServer]:
    """A running InfluxDB with a database `hatchery`. Mark the test with `influxdb`."""
    for program, package in (("influxd", "influxdb"), ("nginx", "nginx-light")):
        if shutil.which(program) is None:
            pytest.skip(f"{program} is not on the path; get it with: apt-get install {package}")
    server = InfluxServer(tmp_path / "influx")
    server.start()
    try:
        server.make_database("hatchery")
        yield server
    finally:
        server.stop()
