"""Shared pytest set-up: the `--long` switch for the full counts."""



def pytest_addoption(parser):
    parser.addoption("--long", action="store_true", help="run the full counts marked 'long' too")


def pytest_collection_modifyitems(config, items):
    if config.getoption("--long"):
        return
    long_items = [item for item in items if item.get_closest_marker("long")]
    if long_items:
        config.hook.pytest_deselected(items=long_items)
        items[:] = [item for item in items if item not in long_items]
