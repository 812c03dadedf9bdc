"""The samples: they compile cleanly, and each nest is read or refused as it should be."""

import shutil
import subprocess
from functools import cache

import pytest
from command_line import SAMPLES

import retile
from retile.library import OpenFile

FILES = sorted(SAMPLES.glob("*.c"))

# Per file and function: ready, or the codes of the refusals.
EXPECTED: dict[str, dict[str, tuple[str, ...]]] = {
    "banded_solve.c": {"band_forward": (), "band_backward": (), "band_scale": ()},
    "beamform.c": {"form_beams": (), "form_beams_in_window": (), "form_beams_afresh": ()},
    "column_stats.c": {"beam_sums": (), "beam_range": (), "remove_means": ()},
    "depth_smooth.c": {"smooth_grid": (), "smooth_rows": (), "depth_change": ()},
    "drift.c": {"drift_transect": (), "drift_area": (), "settle": ()},
    "echo_filter.c": {"filter_window": (), "mark_window": ()},
    "first_return.c": {"first_returns": ("break",), "first_returns_by_halving": ("while",),
                       "sum_until_mark": ("bound",)},
    "gain_table.c": {"apply_gain": (), "clear_counts": ("macro",), "scale_rows": (),
                     "clear_levels": ("pointer-assigned",)},
    "prefix_depth.c": {"sums_along_rows": (), "sums_down_columns": (), "coarse_sums": ()},
    "relax.c": {"relax_four": (), "relax_eight": (), "relax_colour": ()},
    "swath_mosaic.c": {"paint": (), "lift": ()},
    "swath_transpose.c": {"turn_swath": (), "turn_codes": (), "turn_in_place": ()},
    "tidal_factor.c": {"tidal_lu": (), "tidal_cholesky": (), "tidal_forward": ()},
    "tide_normal.c": {"tide_normal_matrix": (), "tide_right_side": (), "tide_mirror": ()},
    "track_match.c": {"match_tracks": (), "common_stretches": ()},
    "travel_time.c": {"depths_from_times": ("call",), "depths_at_one_speed": ()},
}


@cache
def opened(name: str) -> OpenFile:
    return retile.open_file(SAMPLES / name, flags=("-std=c11",))


def test_every_sample_has_an_expectation():
    assert sorted(EXPECTED) == [file.name for file in FILES] and len(FILES) >= 12


@pytest.mark.parametrize("compiler", ["gcc", "clang"])
@pytest.mark.parametrize("file", FILES, ids=lambda file: file.name)
def test_a_sample_compiles_without_a_warning(compiler, file, tmp_path):
    if shutil.which(compiler) is None:
        pytest.skip(f"no {compiler} here")
    strict = ["-std=c11", "-Wall", "-Wextra", "-Wpedantic"]
    done = subprocess.run([compiler, *strict, "-c", file, "-o", tmp_path / "out.o"], capture_output=True, text=True)
    assert (done.returncode, done.stderr) == (0, "")


@pytest.mark.parametrize("file", FILES, ids=lambda file: file.name)
def test_a_sample_says_what_it_does_and_that_it_is_invented(file):
    header = file.read_text(encoding="utf-8").split("#include")[0][:1200].lower()
    assert file.name in header and "invented" in header


def test_samples_come_in_different_styles():
    texts = {file.name: file.read_bytes() for file in FILES}
    assert [name for name, text in texts.items() if b"\r\n" in text] == ["echo_filter.c"]
    assert sum(b"\n\t" in text for text in texts.values()) >= 3
    assert sum(b"#define" in text for text in texts.values()) >= 4


@pytest.mark.parametrize("name", EXPECTED)
def test_each_nest_is_read_or_refused_as_it_should_be(name):
    found = [one for one in opened(name).nests() if one.outermost]
    assert {one.function: tuple(refusal.code for refusal in one.refusals) for one in found
            if one.function in EXPECTED[name]} == EXPECTED[name]


@pytest.mark.parametrize("name", EXPECTED)
def test_a_refusal_points_at_its_place_in_the_text(name):
    for found in opened(name).nests():
        for refusal in found.refusals:
            nest = opened(name).nest(found.address.line, found.address.column)
            said = nest.place(refusal).splitlines()
            assert said[0].startswith(f"{SAMPLES / name}:{refusal.line}:{refusal.column}: ")
            assert said[1].strip() == (SAMPLES / name).read_text().splitlines()[refusal.line - 1].strip()
            assert said[2].strip() == "^"


@pytest.mark.parametrize("name", EXPECTED)
def test_the_outermost_loops_alone_are_the_same_nests(name):
    assert opened(name).nests(inner=False) == tuple(one for one in opened(name).nests() if one.outermost)
