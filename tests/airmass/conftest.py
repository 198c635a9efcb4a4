"""The invented regions, for every test of the folder."""

import importlib.util
from pathlib import Path

import pytest

from etflux.case import Settings, with_settings

_spec = importlib.util.spec_from_file_location("regions", Path(__file__).with_name("regions.py"))
regions = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(regions)


@pytest.fixture(scope="session")
def make():
    """The factories themselves."""
    return regions


@pytest.fixture(scope="session")
def quick():
    """Settings without the other worlds and the ranges."""
    return with_settings(Settings(), air_worlds=False, air_ranges=False)
