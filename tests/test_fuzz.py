"""Every reader of files takes any bytes: it reads them or refuses them with a message.

A few seconds of what `scripts/fuzz` does for as long as wanted, guided by coverage.
"""

from __future__ import annotations

import json
import tempfile
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fuzz_mutation import mutated
from fuzz_targets import TARGETS, attempt

SLOW = {"config": 15, "names": 6, "size_table": 10, "table_metadata": 10}


@pytest.mark.parametrize("name", TARGETS)
def test_any_bytes_are_read_or_refused(name):
    target = TARGETS[name]
    good = target.seeds()

    @settings(
        max_examples=SLOW.get(name, 40),
        deadline=None,
        suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
    )
    @given(st.one_of(st.binary(max_size=200), mutated(good)))
    def tried(content: bytes) -> None:
        with tempfile.TemporaryDirectory() as folder:
            attempt(target, content, Path(folder))

    tried()


@pytest.mark.parametrize("name", sorted(set(TARGETS) - {"fields_raw", "transitions_raw"}))
def test_a_good_file_gets_far(name, tmp_path):
    """Otherwise the mutations of it would test little."""
    done = set()
    for number, seed in enumerate(TARGETS[name].seeds()):
        folder = tmp_path / str(number)
        folder.mkdir()
        done.add(attempt(TARGETS[name], seed, folder))
    # No table belongs to these: the commit record alone and listed files are not there.
    assert "read" in done or name in ("commit_record", "manifest", "table_metadata")


def test_a_job_file_names_no_other_place(tmp_path):
    (good,) = TARGETS["job_file"].seeds()
    for number, name in enumerate(("../a", "/a", "a/b", "", "a\0", "..", 7, None)):
        folder = tmp_path / str(number)
        folder.mkdir()
        content = json.dumps(json.loads(good) | {"name": name}).encode()
        assert attempt(TARGETS["job_file"], content, folder) == "refused"


def test_a_column_that_comes_twice_is_refused(tmp_path):
    content = b"angle_deg,angle_deg,wavelength_um,F11,F11_error\n5,6,0.5,3,0.1\n"
    assert attempt(TARGETS["measurement_csv"], content, tmp_path) == "refused"


def test_a_classic_header_that_lies_does_not_fill_the_memory(tmp_path):
    """A count of attributes of 2^31: the C library would take as much memory as that needs."""
    (good,) = TARGETS["measurement_netcdf"].seeds()
    # Magic, records, then the tag of dimensions and their count.
    assert good[:3] == b"CDF" and good[8:12] == b"\0\0\0\x0a"
    lying = good[:12] + b"\x7f\xff\xff\xff" + good[16:]
    assert attempt(TARGETS["measurement_netcdf"], lying, tmp_path) == "refused"
