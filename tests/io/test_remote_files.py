from __future__ import annotations

import functools
import http.server
import pathlib
import re
import threading

import awkward as ak
import pytest

from tests.io import flat_files
from tests.io.test_les_houches import pair_event
from tests.io.test_les_houches import write as write_les_houches
from tests.require import require
from toprecon.errors import InputError
from toprecon.io import describe, open_events, read_chunk, write_events


class Ranges(http.server.SimpleHTTPRequestHandler):
    """Serve ranges of bytes, as the servers of event files do."""

    def do_GET(self):
        asked = re.fullmatch(r"bytes=(\d+)-(\d*)", self.headers.get("Range", ""))
        path = self.translate_path(self.path)
        if not asked:
            super().do_GET()
            return
        try:
            with pathlib.Path(path).open("rb") as file:
                data = file.read()
        except OSError:
            self.send_error(404)
            return
        first = int(asked[1])
        last = min(int(asked[2] or len(data) - 1), len(data) - 1)
        self.send_response(206)
        self.send_header("Accept-Ranges", "bytes")
        self.send_header("Content-Range", f"bytes {first}-{last}/{len(data)}")
        self.send_header("Content-Length", str(last - first + 1))
        self.end_headers()
        self.wfile.write(data[first : last + 1])

    def end_headers(self):
        self.send_header("Accept-Ranges", "bytes")
        super().end_headers()

    def log_message(self, *args):
        pass


@pytest.fixture
def server(tmp_path):
    require("aiohttp")
    handler = functools.partial(Ranges, directory=str(tmp_path))
    with http.server.ThreadingHTTPServer(("127.0.0.1", 0), handler) as running:
        thread = threading.Thread(target=running.serve_forever, daemon=True)
        thread.start()
        yield f"http://127.0.0.1:{running.server_port}"
        running.shutdown()
        thread.join()


def test_files_are_read_over_http(tmp_path, server):
    path = flat_files.write(tmp_path / "x.root", flat_files.columns(200))
    local = open_events(path, layout=flat_files.LAYOUT)
    remote = open_events(f"{server}/x.root", layout=flat_files.LAYOUT)
    assert list(remote.fingerprints.values()) == list(local.fingerprints.values())
    events = local.read()
    assert ak.array_equal(remote.read(), events, equal_nan=True)
    chunk, _ = read_chunk(remote.references(70)[1], remote.description)
    assert ak.array_equal(chunk.jets, events.jets[70:140], equal_nan=True)
    assert describe(f"{server}/x.root:events").entries == 200


def test_own_and_les_houches_files_are_read_over_http(tmp_path, server):
    path = flat_files.write(tmp_path / "x.root", flat_files.columns(50))
    events = open_events(path, layout=flat_files.LAYOUT).read()
    for suffix in ("root", "parquet"):
        write_events(events, tmp_path / f"own.{suffix}")
        again = open_events(f"{server}/own.{suffix}").read()
        assert ak.array_equal(again.id, events.id)
        assert ak.array_equal(again.jets.E, events.jets.E, check_parameters=False)
    write_les_houches(tmp_path / "x.lhe", [pair_event(k) for k in range(3)])
    assert len(open_events(f"{server}/x.lhe").read()) == 3


def test_an_address_without_a_file_is_an_error(server):
    with pytest.raises(InputError, match=r"none\.root"):
        open_events(f"{server}/none.root", layout=flat_files.LAYOUT)
