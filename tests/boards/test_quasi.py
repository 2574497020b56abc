"""Quasi-random boards: nets in every dimension, a seat for every number, smaller errors at equal cost."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from variation.stages import coupled, limits, real, stage, varying_stages, with_resistor, with_resistors

from biasband.boards import quasi
from biasband.boards.draws import numbers
from biasband.boards.quasi import SCRAMBLINGS, Scrambled, rounded_up
from biasband.boards.streams import Number, Plain
from biasband.circuit.topology import EMITTER_PARTS, TOPOLOGIES
from biasband.coupling import BYPASS, INPUT, OUTPUT, Capacitor, Signal
from biasband.files.stage_file import read_stage
from biasband.stage import Distribution, Stage, Supply

SAMPLES = sorted((Path(__file__).parents[2] / "samples").glob("*.toml"))


def drawn(of: Stage, source: Scrambled | Plain, task: int = 0) -> dict[str, np.ndarray]:
    """The uniform numbers of all boards of a task."""
    blocks = [block.uniforms for block in source.blocks(numbers(of), task)]
    return {name: np.concatenate([block[name] for block in blocks]) for name in blocks[0]}


def test_boards_are_rounded_up_to_a_power_of_two_in_every_scrambling():
    for boards in range(1, 3000):
        expected = SCRAMBLINGS
        while expected < boards:
            expected *= 2
        assert rounded_up(boards) == expected
    assert rounded_up(10**8) == 16 * 2**23  # by hand: 16·2^22 = 67 million are too few


def test_boards_asked_for_are_rounded_up_and_divided_among_the_scramblings():
    source = Scrambled.of(coupled(), boards=1000, seed=1)
    assert (source.boards, source.tasks) == (1024, 16)
    blocks = [block for task in range(16) for block in source.blocks([Number("gain")], task)]
    assert [block.first for block in blocks] == list(range(0, 1024, 64))
    assert {block.uniforms["gain"].shape for block in blocks} == {(64,)}


@pytest.mark.parametrize("each", [1, 64, 1024])
def test_every_slice_of_every_dimension_holds_one_point_of_every_scrambling(each):
    of = everything("divider")
    source = Scrambled.of(of, boards=SCRAMBLINGS * each, seed=3)
    for task in range(SCRAMBLINGS):
        for name, values in drawn(of, source, task).items():
            # A one-dimensional (0, m, 1)-net: one point in every [k/2^m, (k + 1)/2^m) (Sobol' 1967, memory).
            assert sorted(np.floor(values * each)) == list(range(each)), name


def test_scramblings_and_seeds_differ_and_the_same_seed_does_not():
    of = coupled()
    one, again, other = (Scrambled.of(of, boards=1024, seed=seed) for seed in (1, 1, 2))
    first = drawn(of, one)["gain"]
    assert first.tobytes() == drawn(of, again)["gain"].tobytes()
    assert not np.any(first == drawn(of, other)["gain"])
    assert not np.any(first == drawn(of, one, task=1)["gain"])


def test_scramblings_are_independent():
    # The one board of each scrambling, all its numbers, over ten seeds. A correlation of n pairs of
    # independent numbers has a standard deviation of 1/√n; the largest of 16·15/2 = 120 pairs stays below
    # 4.5 of them, but for 1e-3.
    of = everything("divider")
    sources = [Scrambled.of(of, boards=16, seed=seed) for seed in range(10)]
    firsts = np.array(
        [np.concatenate([list(drawn(of, source, task).values()) for source in sources])[:, 0]
         for task in range(SCRAMBLINGS)]
    )  # fmt: skip
    assert np.abs(np.corrcoef(firsts) - np.eye(16)).max() < 4.5 / np.sqrt(firsts.shape[1])


@pytest.mark.parametrize("size", [1, 8, 32])
def test_points_do_not_depend_on_the_block(monkeypatch, size):
    of, source = coupled(), Scrambled.of(coupled(), boards=1024, seed=1)
    whole = drawn(of, source, task=2)
    monkeypatch.setattr(quasi, "BLOCK", size)
    assert len(list(source.blocks(numbers(of), 2))) == 64 // size
    parts = drawn(of, source, task=2)
    assert {name: values.tobytes() for name, values in parts.items()} == {
        name: values.tobytes() for name, values in whole.items()
    }


@pytest.mark.parametrize(("stretch", "block"), [(8, 4), (32, 4), (16, 1024)])
def test_points_do_not_depend_on_the_stretch_and_stay_with_their_scrambling(monkeypatch, stretch, block):
    of, source = coupled(), Scrambled.of(coupled(), boards=1024, seed=1)
    whole = drawn(of, source, task=2)
    monkeypatch.setattr(quasi, "STRETCH", stretch)
    monkeypatch.setattr(quasi, "BLOCK", block)
    assert source.tasks == 1024 // stretch
    groups = [source.group(task) for task in range(source.tasks)]
    assert groups == np.tile(np.arange(16), 64 // stretch).tolist()
    mine = [drawn(of, source, task) for task in range(source.tasks) if source.group(task) == 2]
    for name, values in whole.items():
        assert np.concatenate([part[name] for part in mine]).tobytes() == values.tobytes(), name


@pytest.mark.parametrize("board", [0, 1, 63, 64, 700, 1023])
@pytest.mark.parametrize("sampling", ["plain", "quasi-random"])
def test_one_board_has_the_numbers_that_it_has_among_the_others(sampling, board):
    of = everything("divider")
    if sampling == "plain":
        source = Plain(1024, seed=1, batch_size=7)
        whole = drawn(of, source)
    else:
        source = Scrambled.of(of, boards=1024, seed=1)
        tasks = [drawn(of, source, task) for task in range(16)]
        whole = {name: np.concatenate([each[name] for each in tasks]) for name in tasks[0]}
    for name, value in source.board(numbers(of), board).items():
        assert value.tobytes() == whole[name][board : board + 1].tobytes(), name


def smooth(uniforms: dict[str, np.ndarray]) -> np.ndarray:
    """`Σ 3u² + Π (1 + (u − ½)/4)` over K numbers: by hand its mean is K·1 + 1, since every factor's is 1."""
    points = np.stack(list(uniforms.values()))
    return np.sum(3.0 * points**2, axis=0) + np.prod(1.0 + 0.25 * (points - 0.5), axis=0)


def test_mean_of_a_smooth_function_is_far_nearer_than_with_random_boards():
    of, boards, seeds = coupled(), 2**12, range(8)
    exact = len(numbers(of)) + 1.0

    def error(source: Plain | Scrambled) -> float:
        values = np.concatenate([smooth(drawn(of, source, task)) for task in range(source.tasks)])
        assert values.size == boards
        return float(values.mean() - exact)

    quasi_random = np.sqrt(np.mean([error(Scrambled.of(of, boards=boards, seed=s)) ** 2 for s in seeds]))
    plain = np.sqrt(np.mean([error(Plain(boards, seed=s)) ** 2 for s in seeds]))
    # 256 points a scrambling: the variance of a smooth term falls by far more than 1/n (Owen 1997, memory).
    # Twenty times was found to be forty; eight seeds leave either error uncertain to a quarter.
    assert quasi_random < plain / 20


# --- seats --------------------------------------------------------------------------------------------


def everything(topology: str, *, emitter: tuple[str, ...] = ("RE",), shared: bool = False) -> Stage:
    """A stage of which all varies that can, by batch where it can; its resistors in one group or in none."""
    entry = TOPOLOGIES[topology]
    names = [name for each in entry.resistors for name in (emitter if each == "RE" else (each,))]
    batch = {part: Distribution(name="batch", within_batch=part) for part in (0.01, 0.002, 0.1)}
    rail = replace(limits(8.0, 9.0, 10.0), distribution=batch[0.1])
    transistor = real(
        gain=replace(limits(165.0, 260.0, 410.0), distribution=batch[0.1]),
        base_emitter_voltage=replace(limits(0.57, 0.64, 0.72), distribution=batch[0.01]),
        leakage=40e-9,
    )
    negative = Supply(voltage=replace(limits(-10.0, -9.0, -8.0), distribution=batch[0.1]), varies="by board")
    group = {"group": "reel", "tracking": 3e-5} if shared else {}
    resistor = {"tolerance": 0.01, "tempco": 1e-4, "life_drift": 0.01, "distribution": batch[0.002], **group}
    coupling = {"tolerance": 0.1, "temperature_change": 0.1, "temperature_distance": 60.0}
    return stage(
        topology, dict.fromkeys(names, 1e3), transistor, Supply(voltage=rail, varies="by board"),
        resistor=resistor, negative_supply=negative if entry.split_supply else None,
        ambient=limits(263.15, 298.15, 323.15), boards_per_batch=7,
        signal=Signal(load=10e3, bypassed=True),
        capacitors=tuple(Capacitor(name=name, value=1e-6, **coupling) for name in (INPUT, OUTPUT, BYPASS)),
    )  # fmt: skip


def seats_of(of: Stage) -> dict[str, str]:
    """The seat of each number of a stage."""
    aliases = Scrambled.of(of, boards=16, seed=1).aliases
    return {number.name: aliases.get(number.name, number.name) for number in numbers(of)}


def check_seats(of: Stage) -> None:
    """Every number of a stage has a seat of its own."""
    seats = seats_of(of)
    assert set(seats.values()) <= set(quasi._SEATS)
    assert len(set(seats.values())) == len(seats)
    assert drawn(of, Scrambled.of(of, boards=16, seed=1)).keys() == seats.keys()


@pytest.mark.parametrize("shared", [False, True], ids=["no group", "one group"])
@pytest.mark.parametrize("emitter", [("RE",), EMITTER_PARTS], ids=["one RE", "two"])
@pytest.mark.parametrize("topology", sorted(TOPOLOGIES))
def test_every_number_of_every_topology_has_a_seat(topology, emitter, shared):
    of = everything(topology, emitter=emitter, shared=shared)
    taken = {number.name for number in numbers(of)}
    # That the stage varies as it is meant to: else nothing is shown.
    assert {"gain.batch", "base_emitter_voltage.batch", "supply.batch", f"{BYPASS}.tolerance"} <= taken
    own = {f"{r.name}.tolerance.batch" for r in of.resistors}
    assert {"batch reel", "group reel.tempco"} <= taken if shared else own <= taken
    check_seats(of)


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_every_number_of_every_sample_has_a_seat(path):
    check_seats(read_stage(path))


@settings(deadline=None)
@given(of=varying_stages())
def test_every_number_of_any_stage_has_a_seat(of):
    check_seats(of)


def test_number_without_a_seat_is_refused():
    source = Scrambled.of(coupled(), boards=16, seed=1)
    with pytest.raises(ValueError, match="not in tuple"):
        next(source.blocks([Number("humidity")], 0))


def test_no_two_dimensions_are_alike():
    assert len(set(quasi._SEATS)) == len(quasi._SEATS)


def test_what_a_group_shares_sits_with_its_first_member_under_any_name():
    named = [with_resistors(everything("divider", shared=True), group=group) for group in ("reel", "of RE")]
    for of in named:
        group = of.resistors[0].group
        seats = seats_of(of)
        assert seats[f"batch {group}"] == "batch of R1"  # the divider's first resistor
        assert seats[f"group {group}.tempco"] == "group of R1"
    one, other = (drawn(of, Scrambled.of(of, boards=256, seed=1)) for of in named)
    assert one["batch reel"].tobytes() == other["batch of RE"].tobytes()
    assert one["group reel.tempco"].tobytes() == other["group of RE.tempco"].tobytes()


def test_two_groups_share_nothing():
    of = with_resistor(everything("divider", shared=True), "RC", group="array")
    of = with_resistor(of, "RE", group="array")
    check_seats(of)
    assert seats_of(of)["batch array"] == "batch of RC"


@pytest.mark.parametrize("sampling", ["plain", "quasi-random"])
def test_another_contributor_moves_no_other_s_numbers(sampling):
    few = stage("base-resistor", {"RB": 470e3, "RC": 2.2e3}, real(), 9.0, resistor={"tolerance": 0.01})
    more = everything("split-supply", emitter=EMITTER_PARTS)

    def source(of: Stage) -> Plain | Scrambled:
        return Plain(256, seed=1) if sampling == "plain" else Scrambled.of(of, boards=256, seed=1)

    before, after = (drawn(of, source(of)) for of in (few, more))
    assert len(before) < len(after)
    for name in before:
        assert before[name].tobytes() == after[name].tobytes(), name
