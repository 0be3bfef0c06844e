"""What holds for every test: the user's own cache is neither read nor written."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from tolerance.study.solved import FOLDER_VARIABLE


@pytest.fixture(scope="session", autouse=True)
def _own_cache(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """A cache for this session alone, also for the commands that tests start."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv(FOLDER_VARIABLE, str(tmp_path_factory.mktemp("cache")))
        yield
