from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from generator.disk import Stamp
from generator.settling import Ready, Settling

A, B = Path("a"), Path("b")


def files(version: int) -> tuple[tuple[str, Stamp], ...]:
    return (("assays.csv", Stamp(size=version, modified_ns=0, inode=1)),)


def test_a_changed_folder_is_ready_when_it_was_quiet() -> None:
    """A folder is ready once two equal scans lie the settle time apart, and not before."""
    settling = Settling(0.5)
    assert settling.look(0.0, {A: files(1)}) == Ready()
    assert settling.look(0.4, {A: files(1)}) == Ready()
    assert settling.look(0.5, {A: files(1)}) == Ready(quiet=frozenset({A}))


def test_the_rest_that_is_needed() -> None:
    """Settling tells when the next look is worth while: after the settle time of the first to rest."""
    settling = Settling(0.5)
    assert settling.rest_needed(0.0) is None
    settling.look(1.0, {A: files(1)})
    settling.look(1.2, {A: files(1), B: files(1)})
    assert settling.rest_needed(1.2) == pytest.approx(0.3)
    assert settling.look(1.2 + settling.rest_needed(1.2) + 1e-9, {A: files(1), B: files(1)}).quiet == {A}


def test_every_change_begins_the_quiet_time_anew() -> None:
    """A file that is written in pieces is ready only after the last piece."""
    settling = Settling(0.5)
    for step in range(10):
        assert settling.look(0.4 * step, {A: files(step)}).quiet == frozenset()
    assert settling.look(0.4 * 9 + 0.6, {A: files(9)}).quiet == {A}


def test_one_scan_is_never_enough() -> None:
    """Even without a settle time a folder must be seen equal twice."""
    settling = Settling(0.0)
    assert settling.look(0.0, {A: files(1)}).quiet == frozenset()
    assert settling.look(0.0, {A: files(1)}).quiet == {A}


def test_a_folder_that_never_rests_is_overdue() -> None:
    """A file that changes without end is built after the longest unrest."""
    settling = Settling(0.5, longest_seconds=3.0)
    overdue = [settling.look(float(step), {A: files(step)}).overdue for step in range(5)]
    assert overdue == [frozenset(), frozenset(), frozenset(), {A}, {A}]


def test_what_is_built_is_at_rest() -> None:
    """A built folder is asked for again only when it differs from the scan that was built."""
    settling = Settling(0.5)
    settling.look(0.0, {A: files(1)})
    settling.built({A}, {A: files(1)})
    assert settling.look(9.0, {A: files(1)}) == Ready()
    assert settling.waiting == frozenset()
    settling.look(10.0, {A: files(2)})
    assert settling.waiting == {A}


def test_an_edit_during_a_build_is_seen() -> None:
    """What changed after the scan that was built is built in the next round."""
    settling = Settling(0.5)
    settling.look(0.0, {A: files(1)})
    settling.built({A}, {A: files(1)})
    assert settling.look(5.0, {A: files(2)}) == Ready()
    assert settling.look(5.5, {A: files(2)}).quiet == {A}


def test_an_undone_change_needs_no_build() -> None:
    """A folder that is again as it was built is not waited for."""
    settling = Settling(0.5)
    settling.built({A}, {A: files(1)})
    settling.look(0.0, {A: files(2)})
    settling.look(0.2, {A: files(1)})
    assert settling.look(9.0, {A: files(1)}) == Ready()


def test_a_removed_folder_is_ready_when_it_stays_away() -> None:
    """A folder that vanished is built (as gone) after the settle time; one that comes back is not."""
    settling = Settling(0.5)
    settling.built({A, B}, {A: files(1), B: files(1)})
    settling.look(0.0, {B: files(1)})
    assert settling.look(0.2, {A: files(1), B: files(1)}) == Ready()
    settling.look(1.0, {B: files(1)})
    assert settling.look(1.5, {B: files(1)}).quiet == {A}
    settling.built({A}, {B: files(1)})
    assert settling.look(9.0, {B: files(1)}) == Ready()


def test_folders_settle_each_for_itself() -> None:
    """A restless folder does not hold up another."""
    settling = Settling(0.5)
    settling.look(0.0, {A: files(0), B: files(0)})
    assert settling.look(0.6, {A: files(0), B: files(1)}).quiet == {A}


def test_a_clock_that_stands_still_builds_nothing() -> None:
    """As long as no time passes nothing is quiet."""
    settling = Settling(0.5)
    assert [settling.look(3.0, {A: files(1)}) for _ in range(5)] == [Ready()] * 5


@given(st.lists(st.tuples(st.floats(0, 1), st.dictionaries(st.sampled_from([A, B]), st.integers(0, 2)))))
def test_the_final_state_is_always_built(steps: list[tuple[float, dict[Path, int]]]) -> None:
    """Whatever happened, after a quiet time what was built is what is there."""
    settling = Settling(0.5)
    now, built = 0.0, {}
    final = steps[-1][1] if steps else {}
    for pause, versions in [*steps, (0.0, final), (0.6, final), (0.6, final)]:
        now += pause
        scan = {folder: files(version) for folder, version in versions.items()}
        ready = settling.look(now, scan)
        for folder in ready.quiet | ready.overdue:
            built[folder] = scan.get(folder)
        settling.built(ready.quiet | ready.overdue, scan)
    assert {folder: stamps for folder, stamps in built.items() if stamps} == {
        folder: files(version) for folder, version in final.items()
    }
    assert settling.waiting == frozenset()
