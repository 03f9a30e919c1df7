"""Size and power studies: slow, except where this folder is asked for by name (``pytest tests/truth -q -s``)."""

from pathlib import Path

import pytest

HERE = Path(__file__).parent


@pytest.hookimpl(tryfirst=True)
def pytest_collection_modifyitems(config, items):
    named = any(Path(argument.split("::")[0]).resolve().is_relative_to(HERE) for argument in config.args)
    if named and config.option.markexpr == "not slow":
        return
    for item in items:
        if item.path.is_relative_to(HERE):
            item.add_marker(pytest.mark.slow)
