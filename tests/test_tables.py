"""Tables have the columns and types they promise."""

import pandas as pd
import pytest

from hologyre import tables


@pytest.mark.parametrize(
    "columns", [tables.SINGULARITIES, tables.TRAJECTORIES, tables.EVENTS, tables.FRAMES]
)
def test_empty_table_has_every_column_in_its_type(columns):
    table = tables.empty(columns)
    assert list(table.columns) == [c.name for c in columns]
    assert [str(t) for t in table.dtypes] == [c.dtype for c in columns]


def test_conform_orders_types_and_leaves_what_is_unknown_empty():
    bare = pd.DataFrame({"singularity": [3], "charge": [1.0], "frame": [7]})
    table = tables.conform(bare, tables.SINGULARITIES)
    assert list(table.columns) == [c.name for c in tables.SINGULARITIES]
    assert table["charge"].dtype == "int64"
    assert table["y_um"].isna().all()
    assert list(bare.columns) == ["singularity", "charge", "frame"]


def test_conform_names_the_column_it_does_not_know():
    with pytest.raises(ValueError, match="unknown column colour"):
        tables.conform(pd.DataFrame({"colour": [1]}), tables.EVENTS)


def test_conform_names_the_integer_column_that_is_missing():
    with pytest.raises(ValueError, match="column track is missing"):
        tables.conform(
            pd.DataFrame({"frame": [0], "charge": [1], "singularity": [0]}), tables.TRAJECTORIES
        )
