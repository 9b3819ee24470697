"""What was made of a map lately is kept, but neither for ever nor for another map."""

import gc
import weakref

import xarray as xr

from fieldmap.show.kept import MOST, KeptByMap


def test_it_is_made_once_for_each_map_and_arguments():
    asked = []
    kept = KeptByMap(lambda fmap, *key: asked.append((fmap.attrs["name"], *key)) or len(asked))
    one, other = xr.Dataset(attrs={"name": "a"}), xr.Dataset(attrs={"name": "a"})
    assert [kept(one, 0), kept(one, 1), kept(other, 0), kept(one, 0), kept(other, 0)] == [
        *(1, 2, 3, 1, 3),
    ]
    assert len(asked) == 3


def test_few_are_kept_and_no_map_is_held():
    kept, one = KeptByMap(lambda _, key: [key]), xr.Dataset()
    first = kept(one, 0)
    assert kept(one, 0) is first
    for key in range(1, MOST + 1):
        kept(one, key)
    assert kept(one, 0) is not first
    gone = weakref.ref(one)
    del one
    gc.collect()
    assert gone() is None
