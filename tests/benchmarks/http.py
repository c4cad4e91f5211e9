"""What the service adds to the engine: round trips over loopback, and the time to be ready."""

from __future__ import annotations

import httpx
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

    with serving() as served, httpx.Client(base_url=served.address, timeout=120) as client:

        def asked(shape: tuple[int, ...], form: str) -> bytes:
            body = orjson.dumps({"set": given, "shape": list(shape)})
            headers = {"Content-Type": "application/json", "Accept": f"application/{form}"}
            answer = client.post("/v1/grid", content=body, headers=headers)
            answer.raise_for_status()
            return answer.content

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
