"""The one Spark session of the tests, and the switch for the slow ones."""

import os
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

PROJECT_ROOT = Path(__file__).resolve().parent.parent

# With the importlib import mode pytest adds nothing to the path; the jobs and the package are
# imported from this checkout, never from a copy that happens to be installed.
sys.path.insert(0, str(PROJECT_ROOT))


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--all", action="store_true", help="run the tests marked slow, too")


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    if config.getoption("--all"):
        return
    skip = pytest.mark.skip(reason="slow: runs with --all")
    for item in items:
        if item.get_closest_marker("slow"):
            item.add_marker(skip)


def _worker_path() -> str:
    """PYTHONPATH of the workers: the project first, then whatever was there."""
    return os.pathsep.join(filter(None, [str(PROJECT_ROOT), os.environ.get("PYTHONPATH", "")]))


@pytest.fixture(scope="session")
def spark(tmp_path_factory: pytest.TempPathFactory) -> Iterator["SparkSession"]:
    """One session for all tests that ask for it; tests of kernels never pay for a JVM."""
    from pyspark.sql import SparkSession

    scratch = tmp_path_factory.mktemp("spark")
    # The workers run this interpreter, not whatever `python3` PATH finds first.
    os.environ["PYSPARK_PYTHON"] = sys.executable
    # Workers unpickle functions of this project by importing them.
    os.environ["PYTHONPATH"] = _worker_path()
    # Never look up or bind an outside address: tests run without a network.
    os.environ["SPARK_LOCAL_IP"] = "127.0.0.1"
    session = (
        SparkSession.builder.appName("sparkrank-tests")
        # Two tasks at a time: enough for results to arrive out of order, small enough to share.
        .master("local[2]")
        # A small heap; the tables of the tests have at most some thousands of rows.
        .config("spark.driver.memory", "1g")
        # Loopback only, for the same reason as SPARK_LOCAL_IP.
        .config("spark.driver.bindAddress", "127.0.0.1")
        .config("spark.driver.host", "127.0.0.1")
        # No web page, no port, a second less to start.
        .config("spark.ui.enabled", "false")
        .config("spark.python.unix.domain.socket.enabled", "true")
        .config("spark.ui.showConsoleProgress", "false")
        # The default of 200 empty shuffle partitions is most of a small test's time.
        .config("spark.sql.shuffle.partitions", "2")
        # Nothing that grows with the graph may come to the driver; 1 MB makes a breach a failure.
        .config("spark.driver.maxResultSize", "1m")
        # Times mean the same wherever the tests run.
        .config("spark.sql.session.timeZone", "UTC")
        # Overflow and bad casts are errors, never nulls; the jobs run so, too.
        .config("spark.sql.ansi.enabled", "true")
        # Warehouse and shuffle files stay out of the checkout.
        .config("spark.sql.warehouse.dir", str(scratch / "warehouse"))
        .config("spark.local.dir", str(scratch / "local"))
        # Only what is wrong; the tests' own output stays readable.
        .config("spark.log.level", "ERROR")
        .getOrCreate()
    )
    yield session
    session.stop()
