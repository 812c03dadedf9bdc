"""What retile finds out about the machine."""

import json
import os
import subprocess
import time
from pathlib import Path

import pytest

from retile import host


@pytest.fixture(scope="module")
def machine():
    return host.describe()


def _cache_folder(folder: Path, *rows: dict[str, str]) -> Path:
    for number, row in enumerate(rows):
        (folder / f"index{number}").mkdir()
        for name, value in row.items():
            (folder / f"index{number}" / name).write_text(value + "\n")
    return folder


def test_lines_of_64_bytes_hold_eight_doubles(tmp_path):
    """IEEE 754-2019: binary64 has 64 bits, so 8 of them fill 64 bytes."""
    folder = _cache_folder(
        tmp_path,
        {
            "level": "1",
            "type": "Data",
            "size": "32K",
            "coherency_line_size": "64",
            "ways_of_associativity": "8",
            "shared_cpu_list": "0,4-6",
        },
    )
    (cache,) = host.caches_of_sysfs(folder)
    assert (cache.level, cache.kind, cache.bytes, cache.line_bytes, cache.ways, cache.shared_by) == (
        1,
        "data",
        32768,
        64,
        8,
        4,
    )
    unknown = host.Fact.unknown()
    made = host.Host(unknown, unknown, unknown, (cache,), unknown, (), unknown, unknown, unknown, unknown)
    assert made.line_elements(8) == 8


def test_a_cache_that_the_kernel_describes_in_part_keeps_its_gaps(tmp_path):
    folder = _cache_folder(
        tmp_path, {"level": "2", "type": "Unified"}, {"type": "Data"}, {"level": "x", "type": "Data"}
    )
    (cache,) = host.caches_of_sysfs(folder)
    assert (cache.bytes, cache.line_bytes, cache.ways, cache.shared_by) == (None, None, None, None)
    assert host.caches_of_sysfs(tmp_path / "missing") == []


def test_getconf_zeros_mean_unknown():
    said = (
        "LEVEL1_DCACHE_SIZE                 49152\nLEVEL1_DCACHE_LINESIZE  64\nLEVEL1_DCACHE_ASSOC 0\n"
        "LEVEL2_CACHE_SIZE 0\nLEVEL3_CACHE_SIZE\n"
    )
    (cache,) = host.caches_of_getconf(said)
    assert (cache.level, cache.bytes, cache.line_bytes, cache.ways) == (1, 49152, 64, None)


def test_sysctl_names():
    caches = host.caches_of_sysctl("hw.cachelinesize: 128\nhw.l1dcachesize: 65536\nhw.l2cachesize: 4194304\n")
    assert [(c.level, c.bytes, c.line_bytes) for c in caches] == [(1, 65536, 128), (2, 4194304, 128)]


@pytest.mark.parametrize(
    "text, value",
    [("32K", 32768), ("1M", 1 << 20), ("96", 96), ("", None), (None, None), ("0K", None), ("many", None)],
)
def test_sizes(text, value):
    assert host.bytes_of(text) == value


def test_every_known_fact_says_where_it_comes_from(machine):
    for fact in vars(machine).values():
        if isinstance(fact, host.Fact):
            assert (fact.value is None) == (fact.origin is None)
    assert all(cache.origin for cache in machine.caches)


def test_agrees_with_the_operating_system(machine):
    assert machine.page_bytes.value == os.sysconf("SC_PAGESIZE")
    assert machine.logical_cpus.value == len(os.sched_getaffinity(0))
    for compiler in machine.compilers:
        said = subprocess.run([compiler.path, "--version"], capture_output=True, text=True).stdout
        assert said.startswith(compiler.version)


def test_clock_step_is_small_and_not_zero(machine):
    assert 0 < machine.timer_seconds.value < 1e-3
    assert machine.timer_seconds.value >= 0.5 * time.clock_getres(time.CLOCK_MONOTONIC)


def test_is_json(machine):
    document = json.loads(json.dumps(machine.as_json()))
    assert document["page_bytes"]["value"] == machine.page_bytes.value


def test_a_program_that_is_missing_or_fails_gives_nothing():
    assert host.ask(["no-such-program-here"]) is None
    assert host.ask(["false"]) is None
