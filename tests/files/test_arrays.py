"""Arrays kept by content: what goes in comes out, damage is noticed."""

import numpy as np
import pytest

from massfingerprint.errors import DamagedFileError
from massfingerprint.files.arrays import fetch, fingerprint_of, store


def test_what_is_kept_comes_back_to_the_bit(tmp_path):
    rng = np.random.default_rng(1)
    arrays = {"a": rng.normal(size=(3, 4)), "b": np.array(7, dtype=np.int32)}
    store(tmp_path / "new" / "folder", "key", arrays)
    back = fetch(tmp_path / "new" / "folder", "key")
    assert set(back) == {"a", "b"}
    assert all(np.array_equal(back[name], arrays[name]) and back[name].dtype == arrays[name].dtype for name in arrays)
    assert fetch(tmp_path / "new" / "folder", "other") is None
    assert fetch(tmp_path / "nowhere", "key") is None


@pytest.mark.parametrize("damage", ["flip", "cut", "empty"])
def test_damage_is_noticed(tmp_path, damage):
    store(tmp_path, "key", {"a": np.arange(100.0)})
    (entry,) = tmp_path.iterdir()
    content = bytearray(entry.read_bytes())
    if damage == "flip":
        content[len(content) // 2] ^= 1
    entry.write_bytes({"flip": bytes(content), "cut": bytes(content[:-10]), "empty": b""}[damage])
    with pytest.raises(DamagedFileError, match=r"is damaged .* computed again"):
        fetch(tmp_path, "key")


def test_fingerprints_tell_apart_what_differs():
    one = np.arange(6.0)
    parts = [
        ("ab", "c"),
        ("a", "bc"),
        ("abc",),
        (b"abc",),
        (one,),
        (one.reshape(2, 3),),
        (one.astype(np.float32),),
        (one[::-1],),
        (one, "x"),
    ]
    assert len({fingerprint_of(*part) for part in parts}) == len(parts)
    assert fingerprint_of(one[::2]) == fingerprint_of(np.array([0.0, 2.0, 4.0]))
