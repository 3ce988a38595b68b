import pytest

from tests.checks.made_acquisitions import solving_once


@pytest.fixture(scope="session", autouse=True)
def _hearts_solved_once():
    """Solving a heart costs most of the time of these tests; the same heart in the same conditions is solved once."""
    with pytest.MonkeyPatch.context() as patch:
        solving_once(patch)
        yield
