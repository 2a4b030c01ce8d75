from __future__ import annotations

import numpy as np
import pytest

from tests.io import flat_files
from toprecon.errors import InputError
from toprecon.io import identity, open_events
from toprecon.resampling import hash_text, mix64


def test_run_and_event_number_make_the_identity(tmp_path):
    data = flat_files.columns()
    data["run"] = np.repeat([7, 8], 4)
    path = flat_files.write(tmp_path / "name.root", data)
    event = flat_files.LAYOUT.event.replace(run="run")
    layout = flat_files.LAYOUT.replace(event=event)
    ids = open_events(path, layout=layout).read().id
    with np.errstate(over="ignore"):
        word = mix64(mix64(np.uint64(hash_text("name"))) ^ np.uint64(8))
        assert ids[5] == mix64(word ^ np.uint64(5))


def test_the_identity_follows_the_sample_not_the_file(tmp_path):
    data = flat_files.columns()
    paths = [flat_files.write(tmp_path / f"{n}.root", data) for n in "ab"]
    ids = [open_events({"x": p}, layout=flat_files.LAYOUT).read().id for p in paths]
    assert np.all(ids[0] == ids[1])
    own = [open_events(p, layout=flat_files.LAYOUT).read().id for p in paths]
    assert not np.any(own[0] == own[1])


def test_without_numbers_the_place_in_the_content_counts(tmp_path):
    path = flat_files.write(tmp_path / "a.root", flat_files.columns())
    copy = tmp_path / "b.root"
    copy.write_bytes(path.read_bytes())
    layout = flat_files.LAYOUT.replace(identity="entry")
    ids = [open_events(p, layout=layout).read().id for p in (path, copy)]
    assert np.all(ids[0] == ids[1])
    chunks = list(open_events(path, layout=layout).chunks(3))
    assert np.all(np.concatenate([c.id for c in chunks]) == ids[0])


def test_fingerprints_tell_contents_apart(tmp_path, monkeypatch):
    monkeypatch.setattr(identity, "WHOLE", 1000)
    path = tmp_path / "x"
    data = bytearray(np.random.default_rng(1).bytes(10_000_000))
    path.write_bytes(data)
    first = identity.fingerprint(str(path))
    assert first == identity.fingerprint(str(path))
    assert len(first) == 32
    for place in (0, len(data) - 1):
        changed = bytearray(data)
        changed[place] ^= 1
        path.write_bytes(changed)
        assert identity.fingerprint(str(path)) != first
    path.write_bytes(data[:-1])
    assert identity.fingerprint(str(path)) != first
    with pytest.raises(InputError, match="cannot be read"):
        identity.fingerprint(str(tmp_path / "none"))
