"""What all tests share: a cache of solved edges that is theirs alone."""

import pytest


@pytest.fixture(scope="session", autouse=True)
def cache_of_the_tests(tmp_path_factory):
    """Edges solved by a test are kept for the others, and nowhere else."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("WIDTHWISE_CACHE", str(tmp_path_factory.mktemp("cache")))
        yield
