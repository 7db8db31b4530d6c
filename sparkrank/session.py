"""Opens the Spark session of a job, the same whether started by python or by spark-submit.

Under plain python the JVM is ours to start: heap, loopback, worker Python and a quiet log are set
here. Under spark-submit all of that was decided by whoever submitted, and only what results depend
on (time zone, ANSI arithmetic) is set. Only jobs open sessions.
"""

import logging
import os
import re
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path
from typing import TYPE_CHECKING

from sparkrank.errors import SparkrankError

if TYPE_CHECKING:
    from pyspark.sql import SparkSession

_log = logging.getLogger(__name__)

JAVA_MINIMUM = 17
"""Spark 4 runs on Java 17 and 21."""

PYSPARK_MINIMUM = (4, 1)
"""The first PySpark with everything the jobs use."""

_GIB = 1 << 30
_MIB = 1 << 20
# A quarter of the memory, so that the Python workers and the page cache, which the solve lives
# from, keep the rest; below 1 GiB Spark hardly starts, above 8 GiB nothing here needs it.
_HEAP_SHARE = 4
_HEAP_LEAST_BYTES, _HEAP_MOST_BYTES = 1 * _GIB, 8 * _GIB
# Spark's default heap of 1 GiB reads as somewhat less; it is what a forgotten --driver-memory gives.
_HEAP_ADVISED_BYTES = int(1.5 * _GIB)

# Results depend on these, so they hold whoever configured the session.
_MEANING = {"spark.sql.session.timeZone": "UTC", "spark.sql.ansi.enabled": "true"}


def under_submit() -> bool:
    """Whether spark-submit started this process, and with it the JVM."""
    return "PYSPARK_GATEWAY_PORT" in os.environ


def master_is_local(session: "SparkSession | None" = None) -> bool:
    """Whether Spark runs, or will run, in this machine's memory alone. Starts no JVM."""
    if session is not None:
        master: str | None = session.sparkContext.master
    elif under_submit():
        check_pyspark()
        from pyspark import SparkConf

        master = SparkConf().get("spark.master")
    else:
        master = _given("spark.master") or os.environ.get("MASTER")
    master = master or "local[*]"
    return master == "local" or master.startswith("local[")


def check_runtime() -> None:
    """Check PySpark and, where the JVM is ours to start, Java; SparkrankError with the remedy."""
    check_pyspark()
    if not under_submit():
        check_java()


def check_pyspark() -> None:
    """SparkrankError unless a PySpark that is new enough can be imported."""
    wanted = ".".join(map(str, PYSPARK_MINIMUM))
    remedy = "install it with: pip install 'sparkrank[local]'"
    try:
        import pyspark
    except ImportError:
        raise SparkrankError(
            f"PySpark: expected version {wanted} or later; found none in {sys.executable}; {remedy}"
        ) from None
    found = tuple(int(part) for part in re.findall(r"\d+", pyspark.__version__)[:2])
    if found < PYSPARK_MINIMUM:
        raise SparkrankError(
            f"PySpark: expected version {wanted} or later; found {pyspark.__version__} "
            f"in {os.path.dirname(pyspark.__file__)}; {remedy}"
        )


def check_java() -> None:
    """SparkrankError unless Spark will find a Java that is new enough: JAVA_HOME's, else PATH's."""
    home = os.environ.get("JAVA_HOME")
    remedy = f"install a JDK {JAVA_MINIMUM} or 21 and set JAVA_HOME to its folder"
    java = os.path.join(home, "bin", "java") if home else shutil.which("java")
    where = f"JAVA_HOME={home}" if home else "PATH"
    if java is None or not os.access(java, os.X_OK):
        raise SparkrankError(
            f"Java: expected version {JAVA_MINIMUM} or later; found none by {where}; {remedy}"
        )
    answer = subprocess.run([java, "-version"], capture_output=True, text=True, errors="replace", check=False)
    version = re.search(r'version "(?:1\.)?(\d+)[^"]*"', answer.stderr + answer.stdout)
    if answer.returncode != 0 or version is None:
        raise SparkrankError(
            f"Java: expected version {JAVA_MINIMUM} or later; found {java}, "
            f"which does not tell its version (status {answer.returncode}); {remedy}"
        )
    if int(version.group(1)) < JAVA_MINIMUM:
        raise SparkrankError(
            f"Java: expected version {JAVA_MINIMUM} or later; found {version.group(1)} at {java}; {remedy}"
        )


def open_session(job: str, *, ui: bool = False) -> "SparkSession":
    """The session of a job; the caller stops it. SparkrankError if Java or PySpark is not fit."""
    check_runtime()
    from pyspark.sql import SparkSession

    builder = SparkSession.builder.appName(f"sparkrank {job}")
    if not under_submit():
        _prepare_environment()
        for key, value in _own_settings(ui).items():
            builder = builder.config(key, value)
    session = builder.getOrCreate()
    for key, value in _MEANING.items():
        session.conf.set(key, value)
    if under_submit() or not master_is_local(session):
        _send_package(session)
    if under_submit() and master_is_local(session):
        _check_heap(session)
    return session


def _prepare_environment() -> None:
    """What the JVM and, through it, the workers inherit."""
    if not master_is_local():
        return
    # Workers would take whatever `python3` PATH finds first, without our packages.
    os.environ.setdefault("PYSPARK_PYTHON", sys.executable)
    # Workers import this package from where this process did.
    root = str(Path(__file__).resolve().parent.parent)
    paths = [path for path in os.environ.get("PYTHONPATH", "").split(os.pathsep) if path]
    if root not in paths:
        os.environ["PYTHONPATH"] = os.pathsep.join([root, *paths])
    # Looking up the host's own name fails or warns on many laptops and containers.
    os.environ.setdefault("SPARK_LOCAL_IP", "127.0.0.1")


def _send_package(session: "SparkSession") -> None:
    """Give the workers this package: Spark sends them nothing, though the job's file imports it here."""
    package = Path(__file__).resolve().parent
    if not package.is_dir():
        return  # it came in an archive of --py-files, which the workers have, too
    from pyspark import SparkFiles

    # Spark's own temporary folder: read from while the session lasts, removed with it.
    archive = Path(SparkFiles.getRootDirectory(), "package", f"{package.name}.zip")
    archive.parent.mkdir(exist_ok=True)
    with zipfile.ZipFile(archive, "w", zipfile.ZIP_DEFLATED) as file:
        for path in sorted(package.rglob("*")):
            if path.is_file() and "__pycache__" not in path.parts:
                file.write(path, path.relative_to(package.parent))
    session.sparkContext.addPyFile(str(archive))


def _own_settings(ui: bool) -> dict[str, str]:
    """Settings of a session under plain python; what the user's own Spark defaults say wins."""
    settings = {
        # A bar would mix with step lines in a file; on a terminal it shows long stages.
        "spark.ui.showConsoleProgress": str(sys.stderr.isatty()).lower(),
        # No port is opened unless somebody wants to look.
        "spark.ui.enabled": "false",
        # Between JVM and worker, TCP holds small messages back for 40 ms a task.
        "spark.python.unix.domain.socket.enabled": "true",
        **_MEANING,
    }
    if master_is_local():
        log = Path(__file__).with_name("log4j2.properties")
        settings |= {
            "spark.driver.memory": f"{heap_bytes() // _MIB}m",
            "spark.driver.bindAddress": "127.0.0.1",
            "spark.driver.host": "127.0.0.1",
        }
        if log.exists():
            settings["spark.driver.extraJavaOptions"] = f"-Dlog4j2.configurationFile={log.as_uri()}"
    settings = {key: value for key, value in settings.items() if key in _MEANING or _given(key) is None}
    return settings | ({"spark.ui.enabled": "true"} if ui else {})


def heap_bytes() -> int:
    """Heap for local mode: a quarter of what this process may use, between 1 and 8 GiB."""
    memory = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    # In a container the machine's memory is not ours; the kernel kills what goes beyond the limit.
    for path in ("/sys/fs/cgroup/memory.max", "/sys/fs/cgroup/memory/memory.limit_in_bytes"):
        try:
            text = Path(path).read_text().strip()
        except OSError:
            continue
        if text.isdigit():
            memory = min(memory, int(text))
    return max(_HEAP_LEAST_BYTES, min(_HEAP_MOST_BYTES, memory // _HEAP_SHARE))


def _given(key: str) -> str | None:
    """A Spark setting that the user gave outside the program: submit arguments or spark-defaults.conf."""
    arguments = os.environ.get("PYSPARK_SUBMIT_ARGS", "")
    option = {"spark.master": "master", "spark.driver.memory": "driver-memory"}.get(key)
    patterns = [rf"--conf[ =]+[\"']?{re.escape(key)}=([^\s\"']+)"]
    if option is not None:
        patterns.append(rf"--{option}[ =]+[\"']?([^\s\"']+)")
    for pattern in patterns:
        if found := re.search(pattern, arguments):
            return found.group(1)
    return _spark_defaults().get(key)


def _spark_defaults() -> dict[str, str]:
    home = os.environ.get("SPARK_HOME")
    folder = os.environ.get("SPARK_CONF_DIR") or (os.path.join(home, "conf") if home else None)
    if folder is None:
        return {}
    try:
        lines = Path(folder, "spark-defaults.conf").read_text(encoding="utf-8").splitlines()
    except OSError:
        return {}
    pairs = [
        re.split(r"[\s=:]+", line.strip(), maxsplit=1) for line in lines if not line.lstrip().startswith("#")
    ]
    return {pair[0]: pair[1].strip() for pair in pairs if len(pair) == 2}


def _check_heap(session: "SparkSession") -> None:
    """Say what the heap is when it is the default: a setting made later is reported, not used."""
    jvm = session.sparkContext._jvm
    assert jvm is not None  # a classic session always has one
    heap = int(jvm.java.lang.Runtime.getRuntime().maxMemory())
    if heap < _HEAP_ADVISED_BYTES:
        _log.warning(
            "heap: expected 1.5 GiB or more for local mode; found %d MiB; "
            "add --driver-memory 4g to spark-submit",
            heap // _MIB,
        )


def print_error(line: str) -> None:
    """Print a line on the standard error that the user sees.

    spark-submit sends a Python driver's standard error to its own standard output; under it the line goes
    through the JVM, whose standard error is the user's.
    """
    if under_submit():
        try:
            from pyspark import SparkContext

            SparkContext._ensure_initialized()
            jvm = SparkContext._jvm
            assert jvm is not None  # initialised just before
            jvm.java.lang.System.err.println(line)
        except Exception as error:  # a JVM that is gone must not cost the line
            _log.debug("the line does not reach the JVM: %s", error)
        else:
            return
    print(line, file=sys.stderr)
