"""The same fleet on a cluster's executor: a farm needs no code of ours."""

from __future__ import annotations

from pathlib import Path

import pytest

from report.amplifier import LIMITS, NETLIST, REVERSED, SMALL_BYPASS, write
from tauledger.fleet import check_targets, named_targets

distributed = pytest.importorskip("distributed", reason="comes with the extra cluster")


def test_a_cluster_gives_what_this_process_gives(tmp_path: Path) -> None:
    texts = [NETLIST, SMALL_BYPASS, REVERSED]
    limits = LIMITS.replace("amp.cir", "*.cir")
    targets = named_targets(
        [write(tmp_path, text, limits, f"{i}.cir") for i, text in enumerate(texts)]
    )
    with (
        distributed.LocalCluster(
            n_workers=1,
            threads_per_worker=1,
            processes=True,
            dashboard_address=None,
            local_directory=str(tmp_path),
        ) as cluster,
        distributed.Client(cluster) as client,
        client.get_executor() as executor,
    ):
        assert check_targets(targets, executor) == check_targets(targets)
