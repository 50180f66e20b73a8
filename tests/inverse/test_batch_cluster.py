"""A campaign through a dask cluster on loopback: the same bytes as by processes of this machine."""

from pathlib import Path

import pytest
from campaigns import compute, rows, text, write

from finback import campaign, cli
from finback.errors import InputError

distributed = pytest.importorskip("distributed")


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore")  # the cluster's own, of ports and event loops
def test_a_cluster_gives_the_same_bytes(tmp_path: Path) -> None:
    described, readings = write(tmp_path, readings=text(rows(12)))
    expected = compute([described, readings], tmp_path / "here")
    out = tmp_path / "out"
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, dashboard_address=None, host="127.0.0.1"
    ) as cluster:
        given = ["batch", str(described), str(readings), "--out", str(out), "--quiet"]
        assert cli.run([*given, "--scheduler", cluster.scheduler_address]) == 0
    assert (out / "results.csv").read_bytes() == expected


@pytest.mark.filterwarnings("ignore")
def test_no_scheduler_is_a_sentence() -> None:
    with pytest.raises(InputError, match=r"no scheduler answers at tcp://127\.0\.0\.1:9"):
        campaign.cluster("tcp://127.0.0.1:9", patience=0.5)


@pytest.mark.filterwarnings("ignore")
def test_an_address_that_is_none_is_a_sentence() -> None:
    with pytest.raises(InputError, match="no scheduler answers at not an address"):
        campaign.cluster("not an address", patience=0.5)
