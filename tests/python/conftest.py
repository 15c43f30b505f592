"""Options of the cross-checks: `--long` also runs what takes minutes."""

import pytest


def pytest_addoption(parser):
    parser.addoption("--long", action="store_true", help="also the checks marked long")


def pytest_configure(config):
    config.addinivalue_line("markers", "long: takes minutes; run with --long")


def pytest_collection_modifyitems(config, items):
    if not config.getoption("--long"):
        skip = pytest.mark.skip(reason="long: run with --long")
        for item in items:
            if "long" in item.keywords:
                item.add_marker(skip)
