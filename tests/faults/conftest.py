"""What the fault tests share."""

import pytest


@pytest.fixture
def told(capsys, request):
    """Show the figures of a long test, whatever the runner hides."""

    def show(figures: object) -> None:
        with capsys.disabled():
            print(f"\n{request.node.name}: {figures}", flush=True)

    return show
