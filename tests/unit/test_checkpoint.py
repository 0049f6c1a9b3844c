"""Checkpoints: whole, exact, refused where they do not belong, and a run that is killed and resumed
is the uninterrupted one bit for bit."""

import os
import signal
import subprocess
import sys
import textwrap
import time
from dataclasses import replace

import numpy as np
import pytest

from fogline.chains import EnsembleResult
from fogline.checkpoint import RunState, load_checkpoint, replacing, save_checkpoint
from fogline.ensemble import run_ensemble
from fogline.mixture import StudentMixture
from fogline.moves import Tally
from fogline.progress import Silent
from fogline.settings import SamplerSettings


def state_with(value: float = 0.0) -> RunState:
    random = np.random.RandomState(31)
    random.standard_normal(3)  # an odd number leaves half a pair behind
    tally = Tally(6)
    tally.add(np.arange(6) % 2 == 0)
    coords = np.full((6, 2), value)
    factors = np.stack([np.eye(2)] * 2)
    mixture = StudentMixture(np.array([0.4, 0.6]), np.ones((2, 2)), factors, dof=7.0)
    chain = np.arange(48.0).reshape(4, 6, 2)
    return RunState(
        round=3,
        step=120,
        coords=coords,
        ln_prob=np.array([-np.inf, *np.linspace(-3.0, -1.0, 5)]),
        random_state=random.get_state(),
        thin=5,
        mixture=mixture,
        chain=chain,
        chain_ln_prob=chain.sum(axis=2),
        tallies={"stretch": tally, "local": Tally(6)},
        history=np.array([[20.0, 3.0, np.nan, np.nan, np.nan, np.nan]]),
        warm_up=460,
    )


def assert_same_state(a: RunState, b: RunState) -> None:
    for name in ("coords", "ln_prob", "chain", "chain_ln_prob", "history"):
        np.testing.assert_array_equal(getattr(a, name), getattr(b, name))
    assert (a.round, a.step, a.thin, a.warm_up) == (b.round, b.step, b.thin, b.warm_up)
    for x, y in zip(a.random_state, b.random_state, strict=True):
        assert np.array_equal(x, y)
    assert a.mixture is not None
    assert b.mixture is not None
    assert a.mixture.dof == b.mixture.dof
    np.testing.assert_array_equal(a.mixture.factors, b.mixture.factors)
    for move, tally in a.tallies.items():
        assert tally.n_proposed == b.tallies[move].n_proposed
        np.testing.assert_array_equal(tally.accepted, b.tallies[move].accepted)


def test_state_survives_the_file(tmp_path):
    path = tmp_path / "c.h5"
    state = state_with()
    save_checkpoint(path, state, "f")
    loaded, message = load_checkpoint(path, "f")
    assert message == ""
    assert_same_state(state, loaded)


def test_random_state_continues_where_it_was(tmp_path):
    path = tmp_path / "c.h5"
    state = state_with()
    save_checkpoint(path, state, "f")
    streams = []
    for random_state in (state.random_state, load_checkpoint(path, "f")[0].random_state):
        random = np.random.RandomState()
        random.set_state(random_state)
        streams.append([random.standard_normal(5), random.uniform(size=5)])
    np.testing.assert_array_equal(*streams)


def test_other_fingerprint_is_left_aside_with_a_message(tmp_path):
    path = tmp_path / "c.h5"
    save_checkpoint(path, state_with(), "f")
    state, message = load_checkpoint(path, "g")
    assert state is None
    assert "belongs to other data or settings" in message


@pytest.mark.parametrize("content", [b"", b"not HDF5", None])
def test_unreadable_file_is_left_aside_with_a_message(tmp_path, content):
    path = tmp_path / "c.h5"
    save_checkpoint(path, state_with(), "f")
    path.write_bytes(path.read_bytes()[:3000] if content is None else content)
    state, message = load_checkpoint(path, "f")
    assert state is None
    assert "cannot be read" in message


def test_no_file_is_no_message(tmp_path):
    assert load_checkpoint(tmp_path / "none.h5", "f") == (None, "")


def write_half(path):
    with replacing(path) as file:
        file["x"] = 1.0
        raise RuntimeError("on the way")


def test_failed_write_leaves_the_former_file_and_no_other(tmp_path):
    path = tmp_path / "c.h5"
    save_checkpoint(path, state_with(), "f")
    before = path.read_bytes()
    with pytest.raises(RuntimeError, match="on the way"):
        write_half(path)
    assert path.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["c.h5"]


def test_leftovers_of_killed_writers_are_removed_once_they_are_old(tmp_path):
    path = tmp_path / "c.h5"
    old, new = tmp_path / ".c.h5.aaa.tmp", tmp_path / ".c.h5.bbb.tmp"
    old.write_bytes(b"")
    new.write_bytes(b"")
    os.utime(old, (0, 0))
    save_checkpoint(path, state_with(), "f")
    assert not old.exists()
    assert new.exists()


WRITER = textwrap.dedent("""
    import sys
    from pathlib import Path
    sys.path.insert(0, sys.argv[1])
    from test_checkpoint import state_with
    from fogline.checkpoint import save_checkpoint
    for _ in range(40):
        save_checkpoint(Path(sys.argv[2]), state_with(float(sys.argv[3])), "f")
""")


def test_two_writers_at_once_never_leave_a_torn_file(tmp_path):
    path = tmp_path / "c.h5"
    save_checkpoint(path, state_with(1.0), "f")
    here = os.path.dirname(__file__)
    writers = [
        subprocess.Popen([sys.executable, "-c", WRITER, here, str(path), value])
        for value in ("1.0", "2.0")
    ]
    seen = set()
    while any(w.poll() is None for w in writers):
        state, message = load_checkpoint(path, "f")
        assert message == ""
        assert np.ptp(state.coords) == 0.0
        seen.add(state.coords[0, 0])
    assert [w.returncode for w in writers] == [0, 0]
    assert seen <= {1.0, 2.0}
    assert [p.name for p in tmp_path.iterdir()] == ["c.h5"]


RUNNER = textwrap.dedent("""
    import sys, time
    from pathlib import Path
    import numpy as np
    import fogline.checkpoint as checkpoints
    import fogline.ensemble as ensemble
    from fogline.settings import SamplerSettings

    checkpoints.CHECKPOINT_SECONDS = 0.0  # every block leaves one
    PAUSE = float(sys.argv[3])

    def log_prob(x):
        time.sleep(PAUSE)
        bend = (x[:, 1] - x[:, 0] ** 2) / 0.3
        return -0.5 * (x**2).sum(axis=1) - 0.5 * bend**2

    settings = SamplerSettings(
        walkers=32, ensembles=2, seed=5, target_ess=10**9, max_rhat=1.01, max_steps=400, thin=2,
        warm_up=(120, 100), components=(2, 4), independence_share=0.5,
    )
    checkpoint = Path(sys.argv[1]) if sys.argv[1] else None
    result = ensemble.run_ensemble(log_prob, 3, settings, 1, checkpoint, sys.argv[4])
    result.save(Path(sys.argv[2]))
""")


def start_run(checkpoint, output, pause, fingerprint="f"):
    command = [sys.executable, "-c", RUNNER, str(checkpoint), str(output), str(pause), fingerprint]
    return subprocess.Popen(command)


def assert_same_result(a: EnsembleResult, b: EnsembleResult) -> None:
    for name in ("chain", "ln_prob", "walker_acceptance", "history"):
        np.testing.assert_array_equal(getattr(a, name), getattr(b, name))
    np.testing.assert_array_equal(a.mixture.factors, b.mixture.factors)
    assert (a.acceptance, a.steps, a.thin, a.reason) == (b.acceptance, b.steps, b.thin, b.reason)
    assert a.importance.ln_z == b.importance.ln_z


@pytest.mark.slow
def test_run_killed_several_times_is_the_uninterrupted_one_bit_for_bit(tmp_path):
    assert start_run("", tmp_path / "whole.h5", 0.0).wait() == 0
    checkpoint, output = tmp_path / "c.h5", tmp_path / "resumed.h5"
    rng = np.random.default_rng(int.from_bytes(os.urandom(4), "little"))
    n_killed, stages = 0, set()
    for _ in range(4):
        before = checkpoint.stat().st_mtime_ns if checkpoint.exists() else 0
        run = start_run(checkpoint, output, 0.003)
        deadline = time.monotonic() + 30.0
        # Let it get on by a checkpoint, then kill at a random instant of what follows.
        while run.poll() is None and time.monotonic() < deadline:
            if checkpoint.exists() and checkpoint.stat().st_mtime_ns != before:
                break
            time.sleep(0.005)
        time.sleep(rng.uniform(0.0, 0.5))
        run.send_signal(signal.SIGKILL)
        n_killed += run.wait() == -signal.SIGKILL
        state, message = load_checkpoint(checkpoint, "f/1")
        assert message == ""
        stages.add((state.round, state.step))
    assert n_killed >= 3
    assert len(stages) >= 3  # each run went on from where the former was killed
    assert not output.exists()
    assert start_run(checkpoint, output, 0.0).wait() == 0
    assert_same_result(
        EnsembleResult.load(tmp_path / "whole.h5"), EnsembleResult.load(tmp_path / "resumed.h5")
    )


def small_run(checkpoint, fingerprint, seed=5, notes=None):

    settings = SamplerSettings(
        walkers=16,
        ensembles=1,
        seed=seed,
        target_ess=10**9,
        max_rhat=1.01,
        max_steps=60,
        thin=1,
        warm_up=(60,),
        components=(2,),
        independence_share=0.5,
    )

    class Notes(Silent):
        def note(self, text):
            if notes is not None:
                notes.append(text)

    def log_prob(x):
        return -0.5 * (x**2).sum(axis=1)

    return run_ensemble(log_prob, 2, settings, 0, checkpoint, fingerprint, Notes())


def test_checkpoint_of_other_inputs_does_not_change_the_run(tmp_path, monkeypatch):
    monkeypatch.setattr("fogline.checkpoint.CHECKPOINT_SECONDS", 0.0)
    path = tmp_path / "c.h5"
    small_run(path, "other", seed=6)
    notes: list[str] = []
    resumed = small_run(path, "mine", notes=notes)
    assert "belongs to other data or settings" in notes[0]
    assert_same_result(resumed, small_run(None, "mine"))


def test_finished_checkpoint_gives_the_result_again(tmp_path, monkeypatch):
    monkeypatch.setattr("fogline.checkpoint.CHECKPOINT_SECONDS", 0.0)
    path = tmp_path / "c.h5"
    first = small_run(path, "f")
    notes: list[str] = []
    assert_same_result(first, small_run(path, "f", notes=notes))
    assert "resumed from a checkpoint, sampling step 60" in notes[0]


def test_result_survives_its_file(tmp_path):
    result = small_run(None, "f")
    result.save(tmp_path / "r.h5")
    loaded = EnsembleResult.load(tmp_path / "r.h5")
    assert_same_result(result, loaded)
    assert replace(loaded.importance, mean=0, sd=0, mean_error=0, sd_error=0) == replace(
        result.importance, mean=0, sd=0, mean_error=0, sd_error=0
    )
