"""A pipeline's way to the service: arrays in, arrays out, errors as exceptions.

with Client("http://127.0.0.1:8420") as client:
    result = client.compute("profile", {"set": {...}, "from": [0], "to": [1], "samples": 512})
    result.values, result.axes[0], result.metadata["unit"]
    identity = client.keep({...}, name="film KL-2")["id"]
    same = client.fetch(identity, "profile", {"from": [0], "to": [1], "samples": 512})
"""

from __future__ import annotations

import io
from collections.abc import Iterator, Mapping, Sequence
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
    key : str, optional
        An API key, where the service asks for one.
    timeout : float
        Seconds to wait for an answer.
    http : httpx.Client, optional
        An HTTP client of the caller's own, for proxies or tests.
    """

    def __init__(
        self, base_url: str, *, key: str | None = None, timeout: float = 300.0, http: httpx.Client | None = None
    ) -> None:
        self._http = http or httpx.Client(base_url=base_url, timeout=timeout)
        self._headers = {} if key is None else {"Authorization": f"Bearer {key}"}

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

    def keep(
        self,
        given: Mapping[str, Any],
        columns: Mapping[str, ArrayLike] | None = None,
        *,
        name: str | None = None,
        tags: Sequence[str] = (),
    ) -> dict[str, Any]:
        """Have a set kept; `given` is the member ``set`` of a request, else as `compute`.

        Returns
        -------
        dict
            The set's record with its ``id``, and ``summary``. The same set again is the same id.
        """
        request = {"set": dict(given), **({} if name is None else {"name": name}), "tags": list(tags)}
        made: dict[str, Any] = self._answer("sets", request, columns, "application/json").json()
        return made

    def sets(self, *, search: str = "", tags: Sequence[str] = ()) -> Iterator[dict[str, Any]]:
        """Records of the sets that are kept, newest first; those with a text in their names and with all tags."""
        query: dict[str, Any] = {"limit": 200, "search": search, "tag": list(tags)}
        while True:
            page = self._get("/v1/sets", query, "application/json").json()
            yield from page["sets"]
            if page["next"] is None:
                return
            query["after"] = page["next"]

    def columns(self, identity: str) -> dict[str, NDArray[Any]]:
        """Columns of a kept set, bit for bit; of a file of reflections use the address itself."""
        content = self._get(f"/v1/sets/{identity}/columns", {}, NPZ).content
        with np.load(io.BytesIO(content), allow_pickle=False) as archive:
            return {column: archive[column] for column in archive.files}

    def fetch(self, identity: str, product: str, members: Mapping[str, Any]) -> Result:
        """Get one product of a kept set; `members` are those of a request, else as `compute`."""
        return _result(self._get(f"/v1/sets/{identity}/{product}", _query(members), NPZ).content)

    def fetch_report(self, identity: str, analysis: str, members: Mapping[str, Any]) -> dict[str, Any]:
        """Get one analysis of a kept set; else as `fetch`."""
        address = f"/v1/sets/{identity}/{analysis}"
        made: dict[str, Any] = self._get(address, _query(members), "application/json").json()
        return made

    def forget(self, identity: str) -> None:
        """Have a kept set deleted."""
        answer = self._http.delete(f"/v1/sets/{identity}", headers=self._headers)
        if answer.is_error:
            raise _error(answer)

    def _get(self, address: str, query: Mapping[str, Any], accept: str) -> httpx.Response:
        answer = self._http.get(address, params=dict(query), headers={**self._headers, "Accept": accept})
        if answer.is_error:
            raise _error(answer)
        return answer

    def _answer(
        self, product: str, request: Mapping[str, Any], columns: Mapping[str, ArrayLike] | None, accept: str
    ) -> httpx.Response:
        body = orjson.dumps(dict(request), option=orjson.OPT_SERIALIZE_NUMPY)
        headers = {**self._headers, "Accept": accept}
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


def _query(members: Mapping[str, Any]) -> dict[str, str]:
    """Members as a query: texts as they are, the rest as JSON."""
    return {
        name: value if isinstance(value, str) else orjson.dumps(value, option=orjson.OPT_SERIALIZE_NUMPY).decode()
        for name, value in members.items()
    }


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
