import pytest
from running import HERE, Service


@pytest.fixture(scope="session")
def service(tmp_path_factory):
    """The service as it is started by a user, with short limits."""
    log = tmp_path_factory.mktemp("service") / "log"
    running = Service(
        log, "-P", "-m", "api", "--port", "PORT", deadline_seconds=20, request_bytes=100_000
    )
    yield running
    running.stop()


@pytest.fixture
def start_odd(tmp_path):
    """Starts services around odd workers, and stops them."""
    started = []

    def start(**settings):
        settings = {"deadline_seconds": 1.5, "memory_mb": 600, "drain_seconds": 3, **settings}
        log = tmp_path / f"log{len(started)}"
        started.append(Service(log, str(HERE / "odd_service.py"), "PORT", **settings))
        return started[-1]

    yield start
    for running in started:
        running.stop()


@pytest.fixture(scope="session")
def odd_service(tmp_path_factory):
    """One service around odd workers for the tests that leave it as it was."""
    log = tmp_path_factory.mktemp("odd") / "log"
    settings = {"deadline_seconds": 1.5, "memory_mb": 600, "queue_limit": 20}
    running = Service(log, str(HERE / "odd_service.py"), "PORT", **settings)
    yield running
    running.stop()
