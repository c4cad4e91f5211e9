"""A pipeline's way to the service: arrays in, arrays out, errors as exceptions.

with Client("http://127.0.0.1:8420") as client:
    result = client.compute("profile", {"set": {...}, "from": [0], "to": [1], "samples": 512})
    result.values, result.axes[0], result.metadata["unit"]
"""

from __future__ import annotations

import io
from collections.abc import Mapping
from dataclasses import dataclass
from types import TracebackType
from typing import Any, Self

import httpx
import numpy as np
import orjson
from numpy.typing import ArrayLike, NDArray

NPZ = "application/x-npz"


class ServiceError(Exception):
    """The service answered with a problem.

    Attributes
    ----------
    status : int
    problem : dict
        The problem document (RFC 9457): title, detail, errors with JSON pointers.
    retry_after : float or None
        Seconds to wait before another try, where the service says so.
    """

    def __init__(self, status: int, problem: dict[str, Any], retry_after: float | None) -> None:
        super().__init__(f"{status}: {problem.get('detail', problem.get('title', 'no detail'))}")
        self.status = status
        self.problem = problem
        self.retry_after = retry_after


@dataclass(frozen=True, slots=True)
class Result:
    """An answer.

    Attributes
    ----------
    values : array
        In the order of the axes; the components of a vector last.
    axes : tuple of float64 array
        Coordinates along each axis, Å; empty for points.
    positions : float64 array, shape (M, d), or None
        Fractional positions of free points.
    uncertainty : array or None
        Standard uncertainty of each value, where it was asked for.
    unmeasured : array or None
        Rms change by terms that were not measured, where it was asked for.
    variable : float64 array, shape (S,), or None
        Of each member of a series.
    metadata : dict
        Unit, summary, treatments applied and notes: the JSON answer without its values.
    """

    values: NDArray[Any]
    axes: tuple[NDArray[np.float64], ...]
    positions: NDArray[np.float64] | None
    metadata: dict[str, Any]
    uncertainty: NDArray[Any] | None = None
    unmeasured: NDArray[Any] | None = None
    variable: NDArray[np.float64] | None = None


class Client:
    """A connection to a service; use it as a context manager.

    Parameters
    ----------
    base_url : str
    timeout : float
        Seconds to wait for an answer.
    http : httpx.Client, optional
        An HTTP client of the caller's own, for proxies, credentials or tests.
    """

    def __init__(self, base_url: str, *, timeout: float = 300.0, http: httpx.Client | None = None) -> None:
        self._http = http or httpx.Client(base_url=base_url, timeout=timeout)

    def compute(
        self, product: str, request: Mapping[str, Any], columns: Mapping[str, ArrayLike] | None = None
    ) -> Result:
        """Have one product computed.

        Parameters
        ----------
        product : {"profile", "slice", "grid", "points", "series"}
        request : mapping
            As in the API; the set's columns may be here, as lists, or in `columns`.
        columns : mapping of str to array, optional
            Columns of the set, each of shape (N,); they travel in binary. NaN in phase_deg
            means unknown.

        Raises
        ------
        ServiceError
            The service answered with a problem.
        httpx.HTTPError
            It did not answer.
        """
        return _result(self._answer(product, request, columns, NPZ).content)

    def report(
        self, analysis: str, request: Mapping[str, Any], columns: Mapping[str, ArrayLike] | None = None
    ) -> dict[str, Any]:
        """Have one analysis made; parameters and errors as of `compute`.

        Parameters
        ----------
        analysis : {"extrema", "integrals", "layers", "statistics", "windows", "compare"}
        """
        made: dict[str, Any] = self._answer(analysis, request, columns, "application/json").json()
        return made

    def picture(
        self,
        product: str,
        request: Mapping[str, Any],
        columns: Mapping[str, ArrayLike] | None = None,
        *,
        media_type: str = "image/png",
    ) -> bytes:
        """Have a profile, slice or grid drawn, as image/png or image/svg+xml; else as `compute`."""
        return self._answer(product, request, columns, media_type).content

    def _answer(
        self, product: str, request: Mapping[str, Any], columns: Mapping[str, ArrayLike] | None, accept: str
    ) -> httpx.Response:
        body = orjson.dumps(dict(request), option=orjson.OPT_SERIALIZE_NUMPY)
        headers = {"Accept": accept}
        if columns is None:
            headers["Content-Type"] = "application/json"
            answer = self._http.post(f"/v1/{product}", content=body, headers=headers)
        else:
            packed = io.BytesIO()
            arrays: dict[str, Any] = {name: np.asarray(column) for name, column in columns.items()}
            np.savez(packed, **arrays)
            files = {
                "request": ("request.json", body, "application/json"),
                "columns": ("columns.npz", packed.getvalue(), NPZ),
            }
            answer = self._http.post(f"/v1/{product}", files=files, headers=headers)
        if answer.is_error:
            raise _error(answer)
        return answer

    def close(self) -> None:
        """Close the connection."""
        self._http.close()

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, fault: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()


def _error(answer: httpx.Response) -> ServiceError:
    try:
        problem = answer.json()
    except ValueError:
        problem = None
    if not isinstance(problem, dict):
        problem = {"title": answer.reason_phrase, "status": answer.status_code}
    wait = answer.headers.get("Retry-After", "")
    return ServiceError(answer.status_code, problem, float(wait) if wait.isdigit() else None)


def _result(content: bytes) -> Result:
    with np.load(io.BytesIO(content), allow_pickle=False) as archive:
        names = sorted(name for name in archive.files if name.startswith("axis_"))
        return Result(
            archive["values"],
            tuple(archive[name] for name in names),
            archive["positions"] if "positions" in archive.files else None,
            orjson.loads(str(archive["metadata"])),
            *(archive[name] if name in archive.files else None for name in ("uncertainty", "unmeasured", "variable")),
        )
