"""What the service adds to the engine: round trips over loopback, and the time to be ready."""

from __future__ import annotations

import http.client
import urllib.parse

import numpy as np
import orjson

from engine import sampling
from engine.assembly import Columns, assemble
from engine.evaluate import evaluate
from engine.lattice import Lattice
from engine.synthesis import Demand
from tests.benchmarks.timing import best
from tests.samples import TRICLINIC, TRICLINIC_ATOMS, crystal_set
from tests.serving import serving


def main() -> None:
    """Print the table."""
    given = crystal_set(TRICLINIC, TRICLINIC_ATOMS, d_min=0.6, unit="e/Å³")
    lattice = Lattice.from_parameters(**TRICLINIC)

    def alone(shape: tuple[int, ...]) -> np.ndarray:
        columns = Columns(
            indices=[given[name] for name in "hkl"], amplitude=given["amplitude"], phase_deg=given["phase_deg"]
        )
        made = assemble(lattice, columns, values="structure_factor", mean=given["mean"])
        return evaluate(made, sampling.full_cell(lattice, shape), demand=Demand(threads=1)).values

    with serving() as served:
        # The plainest client there is: a richer one takes longer over 64 MiB than the service does.
        connection = http.client.HTTPConnection(urllib.parse.urlsplit(served.address).netloc, timeout=120)

        def asked(shape: tuple[int, ...], form: str) -> bytes:
            body = orjson.dumps({"set": given, "shape": list(shape)})
            headers = {"Content-Type": "application/json", "Accept": f"application/{form}"}
            connection.request("POST", "/v1/grid", body, headers)
            answer = connection.getresponse()
            content = answer.read()
            if answer.status != 200:
                raise RuntimeError(content[:500])
            return content

        print("Round trips over loopback, seconds (one worker's threads on both sides)")
        print("  what                          service   engine alone   ratio")
        for name, shape, form in (
            ("64 MiB of .npy, 128×256×256", (128, 256, 256), "x-npy"),
            ("10⁶ values of JSON, 100³", (100, 100, 100), "json"),
            ("10⁶ values of .npy, 100³", (100, 100, 100), "x-npy"),
            ("one small .npy, 16³", (16, 16, 16), "x-npy"),
        ):
            times = best(5, service=lambda s=shape, f=form: asked(s, f), engine=lambda s=shape: alone(s))
            ratio = times["service"] / times["engine"]
            print(f"  {name:28s} {times['service']:9.4f} {times['engine']:12.4f} {ratio:9.2f}", flush=True)
        print(f"  from the command to /health/ready: {served.ready_seconds:.2f} s")


if __name__ == "__main__":
    main()
