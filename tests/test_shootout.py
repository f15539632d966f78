"""The shootout: its plan, equal loudness, the folder it writes; one variant into one file."""

from __future__ import annotations

import json
import math
import re
import threading
from pathlib import Path

import numpy as np
import pytest
import soundfile

import tackbench
from tackbench.audio import load_take, measure_loudness
from tackbench.errors import InputError, WorkError
from tackbench.render import render
from tackbench.shootout import prepare_file, prepare_shootout, shootout
from tackbench.shootout.folder import built_beside, files_of, move_into_place
from tackbench.shootout.identity import identity, json_ready
from tackbench.shootout.matching import CEILING_DB, Sound, match
from tackbench.shootout.plan import make_plan, words_of
from tackbench.shootout.threads import HaltedError, Tally, in_threads
from tackbench.shootout.volts import polarity_of
from tackbench.stage import load_stage

RATE = 48000

CLIPPER = """
format = 1
title = "Clipper <b>&\\"'"
about = "A resistor into two diodes."
[input]
node = "in"
series = "2k2"
[output]
node = "out"
load = "1M"
[parts]
C1 = { capacitor = "10n", pins = ["in", "out"] }
R1 = { resistor = "4k7", pins = ["in", "out"] }
D1 = { diode = "1N4148", anode = "out", cathode = "0" }
D2 = { diode = "1N4148", anode = "0", cathode = "out" }
[mods.clip]
label = "Clip"
at = "silicon"
[mods.clip.positions.silicon]
[mods.clip.positions.germanium]
D1 = "1N270"
D2 = "1N270"
[mods.clip.positions.off]
lift = ["D1", "D2"]
"""
"""A passive stage that solves quickly, with a title that would be markup on a careless page."""


BIASED = """
format = 1
title = "Biased"
about = "An output that rests at half the supply."
[input]
node = "in"
series = "0"
[output]
node = "out"
load = "1M"
[supply]
node = "vcc"
volts = 9.0
[parts]
C1 = { capacitor = "1u", pins = ["in", "out"] }
R1 = { resistor = "10k", pins = ["vcc", "out"] }
R2 = { resistor = "10k", pins = ["out", "0"] }
"""


def tone(seconds: float, peak: float = 0.4) -> np.ndarray:
    t = np.arange(round(seconds * RATE)) / RATE
    return peak * np.exp(-2 * t) * np.sin(2 * np.pi * 440 * t)


@pytest.fixture(scope="module")
def here(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("shootout")
    soundfile.write(folder / "take.wav", tone(0.6), RATE, "PCM_24")
    (folder / "clipper.toml").write_text(CLIPPER, encoding="utf-8")
    return folder


@pytest.fixture(scope="module")
def result(here: Path):
    """One shootout of the passive stage, over everything that it offers."""
    return shootout(here / "take.wav", here / "clipper.toml", folder=here / "out", quality="draft")


# The plan


def words(plan) -> list[str]:
    return words_of(plan)


def test_nothing_asked_of_the_shipped_stage_gives_its_two_questions_in_at_most_eight_files():
    plan = make_plan(load_stage("two-voice"))
    chosen = [(one.settings["clip"], one.settings["supply"]) for one in plan.variants]
    assert set(chosen) == {(clip, volts) for clip in ("germanium", "silicon", "off") for volts in (9.0, 24.0)}
    assert chosen[0] == ("germanium", 9.0)
    assert all(one.settings["voice"] == "drive" for one in plan.variants)
    assert len(plan.variants) + 1 <= 8
    assert plan.merged == 0


def test_what_the_user_set_is_not_tried_when_nothing_is_asked():
    plan = make_plan(load_stage("two-voice"), {"clip": "led"})
    assert [(one.settings["clip"], one.settings["supply"]) for one in plan.variants] == [("led", 9.0), ("led", 24.0)]


def test_another_stage_offers_every_mod_in_turn_and_says_what_is_left_out(here: Path):
    assert len(make_plan(load_stage(here / "clipper.toml")).variants) == 3
    text = CLIPPER + "".join(f'[mods.clip.positions.p{n}]\nR1 = "{n + 5}k"\n' for n in range(20))
    many = here / "many.toml"
    many.write_text(text + '[mods.cut]\nat = "a"\n[mods.cut.positions.a]\n[mods.cut.positions.b]\nC1 = "1n"\n')
    plan = make_plan(load_stage(many))
    assert len(plan.variants) == 11
    assert any(one.settings["cut"] == "b" for one in plan.variants), "a mod with many positions crowds out another"
    assert len(plan.left_out) == 22 + 1 - 10
    assert all("--try clip=p" in sentence for sentence in plan.left_out)


def test_each_value_changes_one_thing_and_a_grid_takes_every_combination():
    stage = load_stage("two-voice")
    tries = {"clip": ["silicon", "off"], "supply": [9, 24]}
    single, grid = make_plan(stage, {}, tries), make_plan(stage, {}, tries, grid=True)
    assert words(single) == ["as built: " + words(single)[0].removeprefix("as built: "), *words(single)[1:]]
    assert [dict(one.choices) for one in single.variants] == [
        {},
        {"clip": "silicon"},
        {"clip": "off"},
        {"supply": 24.0},
    ]
    assert len(grid.variants) == 1 + 4
    assert len(set(words(grid))) == 5


def test_the_same_circuit_under_two_names_is_rendered_once():
    plan = make_plan(load_stage("two-voice"), {}, [("D1+D2", ["1N4148"]), ("clip", ["silicon", "germanium"])])
    assert len(plan.variants) == 2
    assert plan.merged == 1


@pytest.mark.parametrize(
    ("with_", "tries", "grid", "says"),
    [
        ([("clip", "silicon"), ("clip", "off")], {}, False, "set twice"),
        ([("D1+D2", "1N914"), ("D1", "1N4148")], {}, False, "set twice"),
        ({}, {"clp": ["silicon"]}, False, "clip"),
        ({}, {"clip": []}, False, "nothing to try"),
        ({}, {"D1+D2": ["1N914"], "D1": ["1N4148"]}, True, "tried twice"),
        ({}, {"gain": [n / 1000 for n in range(1, 900)]}, True, "at most"),
        ({"clip": "off", "supply": 9}, {}, True, "say what to try"),
    ],
)
def test_a_plan_that_cannot_be_is_one_sentence(with_, tries, grid, says):
    with pytest.raises(InputError, match=says):
        make_plan(load_stage("two-voice"), with_, tries, grid)


# Equal loudness


def sound(samples: np.ndarray, true_peak: float | None = None) -> Sound:
    from tackbench.audio import LoudnessMeter

    meter = LoudnessMeter(RATE, 1)
    meter.add(samples[:, None])
    return Sound(meter.integrated, float(np.max(np.abs(samples))) if true_peak is None else true_peak)


def test_files_come_to_the_loudness_of_the_take():
    take, loud = sound(tone(2.0, 0.2)), sound(tone(2.0, 0.8))
    found = match(take, [loud])
    assert found.gains[0] == pytest.approx(0.25, rel=1e-4)
    assert found.bypass_gain == 1.0
    assert found.lowered_db == 0.0


def test_all_files_come_down_together_under_the_ceiling():
    take = sound(tone(2.0, 0.9))
    found = match(take, [sound(tone(2.0, 0.1)), sound(tone(2.0, 0.3), true_peak=0.45)])
    ceiling = 10 ** (CEILING_DB / 20)
    peaks = [0.1 * found.gains[0], 0.45 * found.gains[1], 0.9 * found.bypass_gain]
    assert max(peaks) == pytest.approx(ceiling, rel=1e-6)
    assert found.gains[1] / found.bypass_gain == pytest.approx(3.0, rel=1e-3)
    assert "under the take" in found.words


def test_a_file_that_the_gate_would_miss_at_first_is_still_matched():
    quiet = tone(2.0, 1e-5)
    found = match(sound(tone(2.0, 0.2)), [sound(quiet)])
    assert found.gains[0] == pytest.approx(2e4, rel=1e-3)


@pytest.mark.parametrize("samples", [np.zeros(RATE), 1e-12 * tone(1.0)], ids=["silence", "rounding error"])
def test_silence_stays_silence(samples: np.ndarray):
    found = match(sound(tone(1.0)), [sound(samples)])
    assert found.silent == (True,)
    assert found.gains == (1.0,)


def test_a_silent_take_is_not_matched():
    found = match(sound(np.zeros(RATE)), [sound(tone(1.0, 0.5))])
    assert found.target_lufs is None
    assert found.gains == (1.0,)
    assert "silent" in found.words


# What is written


def test_every_file_has_the_same_loudness_length_and_rate_and_stays_under_the_ceiling(result):
    for path in result.files:
        samples, rate = soundfile.read(path, always_2d=True)
        assert (rate, samples.shape) == (RATE, (round(0.6 * RATE), 1))
        assert soundfile.info(path).subtype == "PCM_24"
        loudness = measure_loudness(samples, rate).lufs
        assert loudness == pytest.approx(result.data["matching"]["target_lufs"], abs=0.01)
        assert np.max(np.abs(samples)) <= 10 ** (CEILING_DB / 20)


def test_the_files_hold_the_volts_that_their_record_says(result, here: Path):
    take = load_take(here / "take.wav")
    stage = load_stage(here / "clipper.toml")
    for entry, clip in zip(result.variants, ("silicon", "germanium", "off"), strict=True):
        volts = render(take, stage.variant(clip=clip), "draft")
        samples, _ = soundfile.read(result.folder / entry["file"], always_2d=True)
        back = samples * entry["volts_per_full_scale"] + entry["dc_volts"]
        assert np.max(np.abs(back - volts)) < 3 * 2**-23 * entry["volts_per_full_scale"]
        assert entry["output_vpp"] == pytest.approx(np.ptp(volts), rel=1e-12)
        assert entry["crest_factor_db"] == pytest.approx(
            20 * math.log10(np.max(np.abs(volts)) / np.std(volts)), abs=0.01
        )
        ratio = take.volts_per_full_scale / entry["volts_per_full_scale"]
        assert entry["applied_gain_db"] == pytest.approx(20 * math.log10(ratio), abs=1e-9)


def test_level_against_bypass_and_applied_gain_cancel(result):
    for entry in result.variants:
        lowered = result.data["matching"]["lowered_db"]
        assert entry["level_against_bypass_db"] + entry["applied_gain_db"] == pytest.approx(lowered, abs=0.01)


def test_silicon_is_louder_than_germanium_before_matching(result):
    silicon, germanium, off = (entry["level_against_bypass_db"] for entry in result.variants)
    assert off > silicon > germanium + 1.0


def test_the_data_has_no_number_that_is_none(result):
    text = (result.folder / "shootout.json").read_text(encoding="utf-8")
    data = json.loads(text, parse_constant=lambda name: pytest.fail(f"{name} in the file"))
    assert data == result.data
    assert (data["schema"], data["version"]) == ("tackbench.shootout", 1)
    record = data["variants"][1]["record"]
    diodes = [part for part in record["parts"] if part["kind"] == "diode"]
    assert all(part["parameters"]["saturation_current"] > 0 for part in diodes)
    assert data["take"]["calibration_assumed"] is True
    assert any("assumed" in note for note in data["notes"])
    assert any("all converged" in note for note in data["notes"])


def test_the_page_takes_names_as_text_and_allows_only_its_own_script(result):
    text = result.page.read_text(encoding="utf-8")
    assert "<b>" not in text
    assert "&lt;b&gt;" in text
    assert "default-src 'none'" in text
    assert text.count("<script>") == 1
    sources = re.findall(r'<audio [^>]*src="([^"]+)"', text)
    assert sources == [path.name for path in result.files]
    assert "http" not in text.replace('http-equiv="', "")


def test_the_folder_holds_what_is_named_and_nothing_else(result, here: Path):
    names = {path.name for path in result.folder.iterdir()}
    assert names == {path.name for path in result.files} | {"index.html", "shootout.json"}
    assert not list(here.glob(".*.part"))


def test_the_samples_depend_neither_on_threads_nor_on_company(result, here: Path):
    alone = shootout(
        here / "take.wav",
        here / "clipper.toml",
        tries={"clip": ["off"]},
        folder=here / "alone",
        quality="draft",
        threads=1,
    )
    one, other = alone.variants[1], result.variants[2]
    assert one["words"] == other["words"]
    assert one["identity"] == other["identity"]
    assert one["loudness_lufs"] == other["loudness_lufs"]
    assert (alone.folder / one["file"]).read_bytes() == (result.folder / other["file"]).read_bytes()


def test_two_channels_are_two_circuits(here: Path):
    path = here / "stereo.wav"
    soundfile.write(path, np.column_stack([tone(0.5), 0.1 * tone(0.5)]), RATE, "PCM_24")
    both = shootout(path, here / "clipper.toml", tries={"clip": ["off"]}, folder=here / "two", quality="draft")
    samples, _ = soundfile.read(both.files[2], always_2d=True)
    assert np.max(np.abs(samples[:, 0] - 10 * samples[:, 1])) < 30 * 2**-23  # linear: ten times as strong


def test_a_single_sample_is_a_take(here: Path):
    soundfile.write(here / "one.wav", np.array([0.5]), RATE, "PCM_24")
    short = shootout(here / "one.wav", here / "clipper.toml", folder=here / "one", quality="draft")
    assert all(soundfile.info(path).frames == 1 for path in short.files)
    assert any("shorter than one block" in note for note in short.notes)


def test_a_silent_take_gives_silent_files(here: Path):
    soundfile.write(here / "still.wav", np.zeros(RATE // 4), RATE, "PCM_24")
    still = shootout(
        here / "still.wav", "soft-clipper", folder=here / "still", tries={"supply": [18]}, quality="draft"
    )
    for path in still.files:
        assert not np.any(soundfile.read(path)[0])
    assert any("silent" in note for note in still.notes)


def test_a_variant_over_a_limit_is_marked_and_the_rest_goes_on(here: Path):
    text = (
        CLIPPER.replace("[parts]", '[supply]\nnode = "vcc"\nvolts = 9.0\n[parts]')
        + '[mods.cap]\nat = "none"\n[mods.cap.positions.none]\n'
        + '[mods.cap.positions.fitted]\nfit.C9 = { capacitor = "10u", pins = ["vcc", "0"], rated = "16V" }\n'
    ).replace("[mods.clip]", 'R9 = { resistor = "10k", pins = ["vcc", "0"] }\n[mods.clip]', 1)
    (here / "limit.toml").write_text(text)
    found = shootout(
        here / "take.wav",
        here / "limit.toml",
        with_={"cap": "fitted"},
        tries={"supply": [24], "clip": ["off"]},
        folder=here / "limit",
        quality="draft",
    )
    over, fine = found.variants[1], found.variants[2]
    assert over["file"] is None
    assert "C9" in over["over_limits"][0]
    assert fine["file"] is not None
    assert "left out" in found.page.read_text(encoding="utf-8")


# The folder


def test_a_folder_that_holds_things_is_refused_and_left_alone(here: Path):
    full = here / "full"
    full.mkdir()
    (full / "mine.txt").write_text("mine")
    with pytest.raises(InputError, match="already holds files"):
        prepare_shootout(here / "take.wav", here / "clipper.toml", folder=full)
    assert [path.name for path in full.iterdir()] == ["mine.txt"]


def test_overwriting_replaces_our_own_files_only(here: Path):
    folder = here / "again"
    shootout(here / "take.wav", here / "clipper.toml", folder=folder, quality="draft")
    (folder / "mine.txt").write_text("mine")
    tries = {"clip": ["off"]}
    again = shootout(
        here / "take.wav", here / "clipper.toml", {}, tries, folder=folder, quality="draft", overwrite=True
    )
    expected = {path.name for path in again.files} | {"index.html", "shootout.json", "mine.txt"}
    assert {path.name for path in folder.iterdir()} == expected
    assert (folder / "mine.txt").read_text() == "mine"


def test_overwriting_refuses_a_namesake_that_no_shootout_wrote(here: Path):
    folder = here / "foreign"
    folder.mkdir()
    (folder / "00-bypass.wav").write_bytes(b"mine")
    with pytest.raises(InputError, match="no earlier shootout wrote it"):
        prepare_shootout(here / "take.wav", here / "clipper.toml", folder=folder, overwrite=True)
    assert (folder / "00-bypass.wav").read_bytes() == b"mine"


def test_a_forged_record_cannot_reach_out_of_its_folder(tmp_path: Path):
    folder = tmp_path / "out"
    folder.mkdir()
    data = {
        "schema": "tackbench.shootout",
        "bypass": {"file": "../precious.wav"},
        "variants": [{"file": "a/b.wav"}, 3],
    }
    (folder / "shootout.json").write_text(json.dumps(data))
    assert files_of(folder) == {"index.html", "shootout.json"}


def test_nothing_is_left_when_the_work_fails(here: Path):
    job = prepare_shootout(here / "take.wav", here / "clipper.toml", folder=here / "never", quality="draft")

    def give_up(share: float) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        job.run(give_up)
    assert not (here / "never").exists()
    assert not list(here.glob(".*.part"))
    assert not [thread for thread in threading.enumerate() if thread.name.startswith("variant")]


def test_a_take_that_changes_meanwhile_is_an_error(here: Path):
    soundfile.write(here / "moving.wav", tone(0.2), RATE, "PCM_24")
    job = prepare_shootout(here / "moving.wav", here / "clipper.toml", folder=here / "moved", quality="draft")
    job.estimate()
    soundfile.write(here / "moving.wav", tone(0.3), RATE, "PCM_24")
    with pytest.raises(WorkError, match="changed"):
        job.run()
    assert not (here / "moved").exists()


def test_a_folder_that_appeared_meanwhile_is_not_overrun(tmp_path: Path):
    target = tmp_path / "out"
    with built_beside(target) as building:
        (building / "a.wav").write_bytes(b"new")
        target.mkdir()
        (target / "a.txt").write_text("mine")
        move_into_place(building, target, ["a.wav"])
    assert (target / "a.txt").read_text() == "mine"


# One file


def test_as_built_keeps_the_volts_and_the_dc(here: Path):
    take = load_take(here / "take.wav")
    (here / "biased.toml").write_text(BIASED)
    variant = load_stage(here / "biased.toml").variant()
    made = prepare_file(take, variant, here / "asbuilt.wav", "as-built", "draft").run()
    samples, _ = soundfile.read(made.path, always_2d=True)
    volts = render(take, variant, "draft")
    assert soundfile.info(made.path).subtype == "FLOAT"
    assert np.max(np.abs(samples * take.volts_per_full_scale - volts)) < 1e-6 * np.max(np.abs(volts))
    record = json.loads(made.record_path.read_text(encoding="utf-8"))
    assert record["schema"] == "tackbench.render"
    assert record["volts_per_full_scale"] == take.volts_per_full_scale
    assert record["applied_gain_db"] == 0.0


def test_as_built_in_whole_numbers_offers_a_way_out_when_it_would_clip(here: Path):
    take = load_take(here / "take.wav")
    variant = load_stage("two-voice").variant(clip="off", gain=1, level=1)
    with pytest.raises(InputError, match=r"32-bit float|peak"):
        prepare_file(take, variant, here / "clips.flac", "as-built", "draft").run()
    assert not list(here.glob("clips.flac*"))


def test_peak_brings_the_true_peak_to_the_ceiling_and_takes_the_dc_off(here: Path):
    take = load_take(here / "take.wav")
    (here / "biased.toml").write_text(BIASED)
    made = prepare_file(take, load_stage(here / "biased.toml").variant(), here / "peak.flac", "peak", "draft").run()
    assert made.data["dc_volts"] == pytest.approx(4.5, rel=0.01)
    assert made.data["true_peak_dbfs"] == pytest.approx(CEILING_DB, abs=1e-9)
    samples, _ = soundfile.read(made.path)
    assert abs(samples[0]) < 1e-3  # the take begins with a zero, so the output begins at rest
    assert np.max(np.abs(samples)) == pytest.approx(10 ** (CEILING_DB / 20), abs=0.01)


def test_matched_has_the_takes_loudness(here: Path):
    take = load_take(here / "take.wav")
    made = prepare_file(take, load_stage(here / "clipper.toml").variant(), here / "m.wav", "matched", "draft").run()
    samples, rate = soundfile.read(made.path, always_2d=True)
    assert measure_loudness(samples, rate).lufs == pytest.approx(made.data["take"]["loudness_lufs"], abs=0.01)


def test_the_take_itself_is_never_overwritten(here: Path):
    take = load_take(here / "take.wav")
    with pytest.raises(InputError, match="the take itself"):
        prepare_file(take, load_stage(here / "clipper.toml").variant(), take.path, overwrite=True)


# Small pieces


def test_identity_follows_what_changes_samples_and_nothing_else(here: Path):
    stage = load_stage(here / "clipper.toml")
    base = identity(stage.variant().circuit, "take", 0.7, "draft")
    renamed = here / "renamed.toml"
    renamed.write_text(CLIPPER.replace("Clipper", "Other").replace('"10n",', '"10000p",'))
    assert identity(load_stage(renamed).variant().circuit, "take", 0.7, "draft") == base
    others = [
        identity(stage.variant(C1="10.001n").circuit, "take", 0.7, "draft"),
        identity(stage.variant(temperature=26).circuit, "take", 0.7, "draft"),
        identity(stage.variant().circuit, "other", 0.7, "draft"),
        identity(stage.variant().circuit, "take", 0.71, "draft"),
        identity(stage.variant().circuit, "take", 0.7, "best"),
    ]
    assert len({base, *others}) == 6


def test_numbers_that_do_not_exist_become_null():
    assert json_ready({"a": [math.nan, np.float64("inf"), np.int64(3)], 1: (True, None)}) == {
        "a": [None, None, 3],
        "1": [True, None],
    }


@pytest.mark.parametrize(
    ("gains", "expected"), [([1 + 0.2j, 3], "+"), ([-1, -2 + 1j], "inv"), ([1j, 2j], "?"), ([0j], "?")]
)
def test_polarity(gains: list[complex], expected: str):
    assert polarity_of(np.array(gains, dtype=np.complex128)) == expected


def test_a_failing_worker_ends_the_others_and_its_error_comes_out():
    tally = Tally(10)
    started = threading.Event()

    def work(item: int) -> int:
        if item == 0:
            started.wait(5)
            raise WorkError("it broke")
        while True:
            started.set()
            tally.advance(0)

    with pytest.raises(WorkError, match="it broke"):
        in_threads(work, [0, 1], 2, tally, lambda share: None)
    with pytest.raises(HaltedError):
        tally.advance(1)


def test_the_public_name_works_before_and_after_its_package_is_imported():
    assert callable(tackbench.shootout)
    with pytest.raises(InputError, match="no such file"):
        tackbench.shootout("nowhere.wav")
