#!/usr/bin/env python3
"""A model program that hands every batch to a Dask cluster.

evenpoise starts this program once and sends it large batches (workers = 1, batch = 1000 in cluster.toml); each batch is cut
into pieces, and the pieces are evaluated by whatever the cluster has. Answers come back in order.

    python3 dask_model.py ../tank/tank.py      the file with the model: a function `highest_level` of four numbers

    DASK_SCHEDULER_ADDRESS=tcp://...           the scheduler of a running cluster; without it, a local one of two processes

Needs: pip install dask distributed
"""
import os
import sys

PIECE = 50  # points that one task evaluates


def evaluate(points):
    """Runs on the cluster, where the file with the model was sent."""
    from tank import highest_level

    return [highest_level(*point) for point in points]


def main():
    from dask.distributed import Client, LocalCluster

    address = os.environ.get("DASK_SCHEDULER_ADDRESS")
    if address:
        client = Client(address)
    else:
        client = Client(LocalCluster(n_workers=2, threads_per_worker=1, dashboard_address=None))
    client.upload_file(sys.argv[1])
    print(f"{len(client.scheduler_info()['workers'])} workers of the cluster", file=sys.stderr, flush=True)
    batch = []
    for line in sys.stdin:
        if line.split():
            batch.append(tuple(map(float, line.split())))
            continue
        # An empty line ends the batch.
        pieces = [batch[k : k + PIECE] for k in range(0, len(batch), PIECE)]
        for levels in client.gather(client.map(evaluate, pieces, pure=False)):
            for level in levels:
                print(level)
        sys.stdout.flush()
        batch = []
    if not address:
        client.shutdown()


if __name__ == "__main__":
    main()
