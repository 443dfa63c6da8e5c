"""The same blocks on other processes: the same digits, also when a worker is killed while it works."""

from __future__ import annotations

import os
import signal
import sys
import threading
import time
from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import xarray as xr

from stillfield.engine.cluster import ClusterError, check_scheduler
from stillfield.engine.job import Means, Prepared, months_of, prepare
from stillfield.engine.planning import BlockPlan
from stillfield.engine.readers import LazyReader
from stillfield.errors import WeatherError
from stillfield.methods.registry import get_method
from stillfield.settings.still_file import load_still_file

distributed = pytest.importorskip("distributed")
cloudpickle = pytest.importorskip("cloudpickle")
cloudpickle.register_pickle_by_value(sys.modules[__name__])

STILL = load_still_file("config/stills/single-slope-glass.yaml")
# The library's own threads and sockets are closed by the garbage collector some time after the cluster.
pytestmark = pytest.mark.filterwarnings("ignore::ResourceWarning", "ignore::pytest.PytestUnraisableExceptionWarning")


class SlowReader(LazyReader):
    """Takes its time, so that a worker can be killed while it reads."""

    def read(self, name: str, records: slice, block: BlockPlan, out, at) -> Mapping[str, int]:
        time.sleep(0.15)
        return super().read(name, records, block, out, at)


def weather(days: int = 60) -> xr.Dataset:
    random = np.random.default_rng(1)
    shape = (days, 6, 4)
    data = {"irradiation": random.uniform(8.0, 24.0, shape), "temp_air": random.uniform(15.0, 35.0, shape),
            "wind_speed": random.uniform(0.5, 6.0, shape)}
    return xr.Dataset(
        {key: (("time", "latitude", "longitude"), values.astype(np.float32)) for key, values in data.items()},
        coords={"time": pd.date_range("2015-01-01", periods=days, freq="D"),
                "latitude": 10.0 + np.arange(6), "longitude": 40.0 + np.arange(4)},
        attrs={"record": "series", "step_hours": 24.0, "clock": "own-days"})


def rows_apart(prepared: Prepared, reader: LazyReader | None = None) -> Prepared:
    """One block for each row."""
    whole = prepared.plan.blocks[0]
    blocks = tuple(replace(whole, rows=slice(row, row + 1), columns=slice(0, 4), windows=(slice(0, 30), slice(30, 60)))
                   for row in range(6))
    return replace(prepared, plan=replace(prepared.plan, blocks=blocks, workers=2), reader=reader or prepared.reader)


@pytest.fixture(scope="module")
def cluster() -> Iterator[distributed.LocalCluster]:
    with distributed.LocalCluster(n_workers=2, threads_per_worker=1, processes=True, silence_logs=50,
                                  dashboard_address="127.0.0.1:0", scheduler_kwargs={"dashboard": False}) as made:
        yield made


def on(cluster: distributed.LocalCluster, prepared: Prepared) -> Prepared:
    return replace(prepared, means=Means(2, scheduler=cluster.scheduler_address))


def test_a_cluster_gives_the_digits_of_this_process(cluster) -> None:
    prepared = rows_apart(prepare(weather(), get_method("fitted")))
    here = months_of(prepared, [STILL], followed=[3])
    there = months_of(on(cluster, prepared), [STILL], followed=[3])
    xr.testing.assert_identical(there.monthly[0], here.monthly[0])
    np.testing.assert_array_equal(there.followed[3], here.followed[3])


def test_a_killed_worker_costs_time_and_no_digit(cluster) -> None:
    prepared = prepare(weather(), get_method("fitted"))
    here = months_of(rows_apart(prepared), [STILL]).monthly[0]
    slow = on(cluster, rows_apart(prepared, SlowReader(prepared.reader.weather)))
    before = {worker.pid for worker in cluster.workers.values()}
    killed = []

    def kill() -> None:
        time.sleep(1.2)
        killed.append(next(iter(before)))
        os.kill(killed[0], signal.SIGKILL)

    killer = threading.Thread(target=kill)
    killer.start()
    found = months_of(slow, [STILL]).monthly[0]
    killer.join()
    xr.testing.assert_identical(found, here)
    assert killed
    assert killed[0] not in {worker.pid for worker in cluster.workers.values() if worker.process.is_alive()}


def test_processes_of_this_machine_give_the_digits_of_this_process() -> None:
    prepared = rows_apart(prepare(weather(), get_method("fitted")))
    here = months_of(prepared, [STILL]).monthly[0]
    there = months_of(replace(prepared, means=Means(2, scheduler="processes")), [STILL]).monthly[0]
    xr.testing.assert_identical(there, here)


def test_a_fault_in_the_weather_comes_back_as_it_is(cluster) -> None:
    data = weather()
    data["temp_air"][5, 2, 1] = 93.0
    prepared = on(cluster, rows_apart(prepare(data, get_method("fitted"))))
    with pytest.raises(WeatherError, match=r"latitude 12, longitude 41.*temp_air cannot be true"):
        months_of(prepared, [STILL])


def test_a_scheduler_that_is_not_there_is_told() -> None:
    with pytest.raises(ClusterError, match=r"compute\.scheduler: no scheduler answers \(got nonsense"):
        check_scheduler("nonsense:1")
