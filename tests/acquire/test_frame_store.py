import errno
import hashlib
from pathlib import Path

import cv2
import numpy as np
import pytest

from pitchsweep.acquire import durable_files
from pitchsweep.acquire.acquire_errors import StorageFailed
from pitchsweep.acquire.frame_store import FrameStore, decode_frame


def frame() -> np.ndarray[tuple[int, int], np.dtype[np.uint16]]:
    return np.random.default_rng(0).integers(0, 65536, (40, 60)).astype(np.uint16)


def test_a_frame_comes_back_to_the_last_bit(tmp_path: Path) -> None:
    store = FrameStore(tmp_path)
    kept = store.keep(7, frame())
    assert kept.file == "frames/000007.png"
    data = (tmp_path / kept.file).read_bytes()
    assert kept.sha256 == hashlib.sha256(data).hexdigest()
    assert np.array_equal(store.read(kept.file, kept.sha256), frame())
    assert [p.name for p in (tmp_path / "frames").iterdir()] == ["000007.png"]


def test_equal_frames_have_equal_checksums(tmp_path: Path) -> None:
    store = FrameStore(tmp_path)
    assert store.keep(1, frame()).sha256 == store.keep(2, frame()).sha256


def test_a_changed_or_missing_frame_is_named(tmp_path: Path) -> None:
    store = FrameStore(tmp_path)
    kept = store.keep(1, frame())
    path = tmp_path / kept.file
    path.write_bytes(path.read_bytes()[:-1] + b"x")
    with pytest.raises(StorageFailed, match="000001.png: the frame is not what"):
        store.read(kept.file, kept.sha256)
    path.unlink()
    with pytest.raises(StorageFailed, match="000001.png: the frame cannot be read"):
        store.read(kept.file, kept.sha256)


def test_a_full_disk_leaves_the_old_frame_and_no_rest(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    store = FrameStore(tmp_path)
    kept = store.keep(1, frame())

    def full(_: int) -> None:
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(durable_files.os, "fsync", full)
    with pytest.raises(StorageFailed, match="make space"):
        store.keep(1, frame() // 2)
    assert np.array_equal(store.read(kept.file, kept.sha256), frame())
    assert len(list((tmp_path / "frames").iterdir())) == 1


def test_only_grey_frames_are_decoded() -> None:
    _, grey = cv2.imencode(".tif", np.full((4, 5), 200, np.uint8))
    image = decode_frame(Path("a.tif"), grey.tobytes())
    assert image.dtype == np.uint16 and image.max() == 200
    _, colour = cv2.imencode(".png", np.zeros((4, 5, 3), np.uint8))
    with pytest.raises(StorageFailed, match="colour"):
        decode_frame(Path("a.png"), colour.tobytes())
    with pytest.raises(StorageFailed, match="not an image"):
        decode_frame(Path("a.png"), b"text")
    with pytest.raises(StorageFailed, match="not an image"):
        decode_frame(Path("a.png"), b"")
