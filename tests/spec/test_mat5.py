"""MAT files of version 5: what another writer puts into them is what is read, and damage is told."""

from __future__ import annotations

import io
import warnings
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.io
import scipy.sparse
from hypothesis import given, settings
from hypothesis import strategies as st

from linverify.spec import mat5
from linverify.spec.claims import Claim
from linverify.spec.models_binary import read_mat
from linverify.spec.reader import Reader

VALUES: dict[str, Any] = {
    "double": np.array([[1.5, -2.0, 5e-324], [0.0, -0.0, 1e300]]),
    "single": np.array([[0.1, 2.0]], dtype=np.float32),
    "small": np.array([[1.0, 200.0]]),  # written as bytes
    "int8": np.array([[-128, 127]], dtype=np.int8),
    "uint64": np.array([[2**63]], dtype=np.uint64),
    "truth": np.array([[True, False]]),
    "stack": np.arange(24.0).reshape(2, 3, 4),
    "nothing": np.zeros((0, 3)),
    "sparse": scipy.sparse.csc_array(np.array([[0.0, 1.0, 0.0], [2.0, 0.0, 3.5]])),
    "blank": scipy.sparse.csc_array((2, 3)),
}


def saved(values: dict[str, Any], *, packed: bool = False) -> bytes:
    stream = io.BytesIO()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        scipy.io.savemat(stream, values, do_compression=packed)
    return stream.getvalue()


@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize("name", VALUES)
def test_numbers_are_read_as_scipy_reads_them(name: str, packed: bool) -> None:
    data = saved({name: VALUES[name]}, packed=packed)
    ours, theirs = mat5.arrays(data)[name], scipy.io.loadmat(io.BytesIO(data))[name]
    theirs = theirs.toarray() if hasattr(theirs, "toarray") else theirs
    assert ours.shape == theirs.shape
    np.testing.assert_array_equal(np.signbit(ours.astype(float)), np.signbit(theirs.astype(float)))
    np.testing.assert_array_equal(ours, theirs)


@pytest.mark.parametrize("packed", [False, True])
def test_text_and_cells(packed: bool) -> None:
    cells = np.array(["pitch", "", "äöü"], dtype=object)
    read = mat5.arrays(saved({"one": "pitch", "rows": np.array(["ab", "cde"]), "cells": cells}, packed=packed))
    assert read["one"].tolist() == ["pitch"]
    assert read["rows"].tolist() == ["ab", "cde"]
    assert read["cells"].tolist() == ["pitch", "", "äöü"]


FILES = sorted((Path(scipy.io.__file__).parent / "matlab" / "tests" / "data").glob("test*_[67]*.mat"))


@pytest.mark.skipif(not FILES, reason="this scipy comes without the files of its own tests")
def test_files_of_other_writers() -> None:
    """Big and little endian, packed or not, from several versions."""
    for path in FILES:
        try:
            ours = mat5.arrays(path.read_bytes())
        except mat5.MatError as error:
            assert "damaged" not in str(error), path.name
            continue
        for name, theirs in scipy.io.loadmat(path).items():
            if name in ours and isinstance(theirs, np.ndarray) and theirs.dtype.kind in "iuf":
                np.testing.assert_array_equal(ours[name], theirs)


def claims(**values: Any) -> tuple[dict[str, Claim], list[str]]:
    reader = Reader({})
    return read_mat(reader, saved(values), "m.mat"), [problem.wrong for problem in reader.problems]


def test_one_name_is_text_and_a_column_may_lie() -> None:
    found, told = claims(A=-1.0, B=[[1.0, 2.0]], states="x", inputs=np.array(["u", "v"], dtype=object))
    assert told == []
    assert [word.text for word in found[""].names["states"].words] == ["x"]
    assert found[""].matrices["B"].values.tolist() == [1.0, 2.0]


def test_a_stack_has_its_points_along_the_last_axis() -> None:
    A = np.arange(12.0).reshape(2, 2, 3)
    found, told = claims(A=A, B=[[1.0], [2.0]], x0=[[1, 2, 3], [4, 5, 6]], op=np.array(["a", "b", "c"], dtype=object))
    assert told == []
    np.testing.assert_array_equal(found["b"].matrices["A"].values, A[:, :, 1])
    assert found["c"].matrices["B"].values.tolist() == [1.0, 2.0]
    assert [number.value for number in found["b"].at["x0"].ordered or ()] == [2.0, 5.0]


@settings(max_examples=400, deadline=None)
@given(data=st.data(), packed=st.booleans())
def test_damage_is_told(data: st.DataObject, packed: bool) -> None:
    whole = saved({**VALUES, "cells": np.array(["pitch", "roll"], dtype=object)}, packed=packed)
    at = data.draw(st.integers(0, len(whole)))
    cut = data.draw(st.integers(0, min(len(whole) - at, 16)))
    damaged = whole[:at] + data.draw(st.binary(max_size=8)) + whole[at + cut :]
    try:
        read = mat5.arrays(damaged)
    except mat5.MatError as error:
        assert str(error)
    else:
        assert all(isinstance(values, np.ndarray) for values in read.values())
