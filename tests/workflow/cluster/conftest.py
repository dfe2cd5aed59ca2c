"""A Slurm for all tests that need one."""

from collections.abc import Iterator
from importlib.util import find_spec

import pytest

from tests.workflow.cluster.slurm import Slurm, missing_programs

_PLUGINS = ("snakemake_executor_plugin_slurm", "snakemake_executor_plugin_cluster_generic")


@pytest.fixture(scope="session")
def slurm(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Slurm]:
    """A cluster of three nodes on this machine, where Slurm and its plugins are installed."""
    if missing := missing_programs():
        packages = "apt-get install slurmctld slurmd slurm-client munge"
        pytest.skip(f"no {', '.join(missing)}: {packages}")
    if missing := [name for name in _PLUGINS if find_spec(name) is None]:
        pytest.skip(f"no {', '.join(missing)}: pip install '.[cluster]'")
    cluster = Slurm(tmp_path_factory.mktemp("slurm"))
    try:
        cluster.start()
        yield cluster
    finally:
        cluster.stop()
