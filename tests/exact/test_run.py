"""The folder of a run: what is written comes back, and what cannot be taken up is refused in words."""

import json

import numpy as np
import pytest

from inverse.outcome import BriefError
from inverse.run import CHECKPOINT, Run, read_log

LEAVES = [np.linspace(0.0, 1.0, 7), np.array(3, dtype=np.int32), np.array([1, 2], dtype=np.uint32), np.zeros((2, 0))]


def saved(folder):
    run = Run(folder, "digest-a")
    run.keep("1.1", LEAVES, 150, True)
    run.keep("2.1", LEAVES[:1], 50, False)
    return folder / CHECKPOINT


def test_a_checkpoint_comes_back_bit_for_bit(tmp_path):
    """Every array with its type and shape, the step and whether the job was finished, for several jobs."""
    saved(tmp_path)
    again = Run(tmp_path, "digest-a", resume=True)
    leaves, step, finished = again.recall("1.1")
    assert (step, finished) == (150, True)
    for old, new in zip(LEAVES, leaves, strict=True):
        assert old.dtype == new.dtype
        np.testing.assert_array_equal(old, new)
    assert again.recall("2.1")[1:] == (50, False)
    assert again.recall("9.9") is None


def test_more_than_ten_arrays_keep_their_order(tmp_path):
    """Array 10 comes after array 9, not after array 1."""
    Run(tmp_path, "d").keep("1.1", [np.array(float(i)) for i in range(12)], 50, False)
    leaves, _, _ = Run(tmp_path, "d", resume=True).recall("1.1")
    assert [float(a) for a in leaves] == list(range(12))


def test_a_later_state_replaces_the_earlier_one(tmp_path):
    """Keeping the same job twice leaves the second."""
    run = Run(tmp_path, "d")
    run.keep("1.1", [np.zeros(3), np.ones(2)], 50, False)
    run.keep("1.1", [np.full(3, 7.0)], 100, True)
    leaves, step, finished = Run(tmp_path, "d", resume=True).recall("1.1")
    assert (len(leaves), step, finished) == (1, 100, True) and leaves[0][0] == 7.0


def test_without_resume_nothing_is_taken_up(tmp_path):
    """A fresh run in a used folder knows no job and no row."""
    saved(tmp_path)
    fresh = Run(tmp_path, "digest-a")
    assert fresh.recall("1.1") is None and fresh.rows == []


def test_nothing_to_resume_from(tmp_path):
    """No checkpoint: one sentence that names the file and what to do."""
    with pytest.raises(BriefError, match="no checkpoint to resume from. Leave out --resume"):
        Run(tmp_path, "digest-a", resume=True)


def test_a_checkpoint_of_another_brief_is_refused(tmp_path):
    """The digest decides."""
    saved(tmp_path)
    with pytest.raises(BriefError, match="made from another brief"):
        Run(tmp_path, "digest-b", resume=True)


@pytest.mark.parametrize("spoil", [
    lambda data: b"", lambda data: b"not a zip", lambda data: data[: len(data) // 2], lambda data: data[:-30],
    lambda data: data.replace(b"NUMPY", b"nUMPY"), lambda data: data[:200] + bytes(40) + data[240:],
], ids=["empty", "text", "half", "end missing", "no arrays", "zeroed"])  # fmt: skip
def test_a_spoiled_checkpoint_is_refused(tmp_path, spoil):
    """Whatever was done to the file: a BriefError that says to leave out --resume, never another exception."""
    path = saved(tmp_path)
    path.write_bytes(spoil(path.read_bytes()))
    with pytest.raises(BriefError, match="Leave out --resume"):
        Run(tmp_path, "digest-a", resume=True)


@pytest.mark.parametrize("content", [{"digest": "digest-a", "odd": np.zeros(2)}, {"other": np.zeros(2)}],
                         ids=["a name without its job", "no digest"])  # fmt: skip
def test_a_checkpoint_of_other_contents_is_refused(tmp_path, content):
    """A sound archive that is not ours."""
    np.savez(tmp_path / CHECKPOINT, **content)
    with pytest.raises(BriefError, match="not a checkpoint of this version"):
        Run(tmp_path, "digest-a", resume=True)


def test_a_checkpoint_with_code_inside_is_refused(tmp_path):
    """Pickled objects are not loaded."""
    np.savez(tmp_path / CHECKPOINT, digest="digest-a", **{"1.1/0": np.array([{"a": 1}], dtype=object)})
    with pytest.raises(BriefError, match="not a checkpoint of this version"):
        Run(tmp_path, "digest-a", resume=True)


def rows():
    base = {"stage": "round 1, start 1: point seed, pocket ×1.00", "pocket draft": 0.0261799}
    return [base | {"step": 50 * i, "merit": -0.8 - i / 3, "rays": 10**7} for i in (1, 2)]


def test_the_log_comes_back(tmp_path):
    """Words as words, numbers as numbers to seven digits, commas in a stage unharmed."""
    run = Run(tmp_path, "d")
    for row in rows():
        run.record(row)
    back = read_log(tmp_path / "log.csv")
    assert [r["stage"] for r in back] == [r["stage"] for r in rows()]
    for old, new in zip(rows(), back, strict=True):
        assert list(old) == list(new)
        for key in ("step", "merit", "rays", "pocket draft"):
            assert new[key] == pytest.approx(old[key], rel=1e-6)


def test_a_resumed_run_goes_on_with_its_log(tmp_path):
    """The old rows stay before the new one."""
    run = Run(tmp_path, "d")
    run.keep("1.1", LEAVES, 50, False)
    run.record(rows()[0])
    again = Run(tmp_path, "d", resume=True)
    again.record(rows()[1])
    assert [r["step"] for r in read_log(tmp_path / "log.csv")] == [50.0, 100.0]


def test_the_result_is_plain_json(tmp_path):
    """Readable by anyone; a value that is no number is a defect and is refused."""
    run = Run(tmp_path, "d")
    run.write_json("result.json", {"share": 0.8, "none": None})
    assert json.loads((tmp_path / "result.json").read_text()) == {"share": 0.8, "none": None}
    with pytest.raises(ValueError):
        run.write_json("result.json", {"share": float("nan")})
    assert json.loads((tmp_path / "result.json").read_text())["share"] == 0.8


def test_no_temporary_file_is_left(tmp_path):
    """After writing, only the named files are in the folder."""
    saved(tmp_path)
    Run(tmp_path, "digest-a").record(rows()[0])
    assert sorted(p.name for p in tmp_path.iterdir()) == [CHECKPOINT, "log.csv"]
