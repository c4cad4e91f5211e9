"""What a GET about a stored set asks for, understood once for each way it is written."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import version
from urllib.parse import parse_qsl

import orjson
from pydantic import ValidationError

from service import query
from service.encoders.negotiation import choose
from service.problems import at, from_validation
from service.schemas.requests import REQUESTS

RELEASE = version("densityloom")
REMEMBERED = 4096
"""Ways of asking that are remembered: a page that moves through a cell asks a few hundred."""
LONGEST = 4096
"""Characters of a query that is remembered."""


@dataclass(frozen=True, slots=True)
class Asked:
    """A checked request.

    Attributes
    ----------
    product : str
    form : str
        Of the answer.
    body : bytes
        The request as a worker gets it.
    key : str
        Names the answer: by the set, the request, the form, and the release that computes it.
    """

    product: str
    form: str
    body: bytes
    key: str


def understand(product: str, identity: str, written: str, accept: str) -> Asked:
    """Read and check a query.

    Parameters
    ----------
    identity : str
        Id of the set.
    written : str
        The query as it stands in the address.
    accept : str
        The Accept header.

    Raises
    ------
    Problem
        406: no form of answer that the client takes; 422: a member that is at fault.
    """
    if len(written) + len(accept) > LONGEST:
        return _understood(product, identity, written, accept)
    return _remembered(product, identity, written, accept)


def _understood(product: str, identity: str, written: str, accept: str) -> Asked:
    pairs = parse_qsl(written, keep_blank_values=True)
    forms = [text for name, text in pairs if name == "format"]
    if len(forms) > 1:
        raise at(("format",), "is given twice", "give it once")
    form = choose(product, accept, forms[0] if forms else None)
    document = query.document(product, [pair for pair in pairs if pair[0] != "format"])
    try:
        REQUESTS[product].model_validate({**document, "set": query.PLACEHOLDER})
    except ValidationError as fault:
        raise from_validation(fault) from fault
    body = orjson.dumps({**document, "set_id": identity}, option=orjson.OPT_SORT_KEYS)
    named = orjson.dumps([product, form, RELEASE])
    return Asked(product, form, body, hashlib.sha256(named + body).hexdigest()[:40])


_remembered = lru_cache(maxsize=REMEMBERED)(_understood)
