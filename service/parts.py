"""Files that come with a request."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Part:
    """A file sent beside a request, or as the whole body.

    Attributes
    ----------
    media_type : str
        Without parameters, in small letters.
    data : bytes
    name : str
        File name as the client gives it; for messages, and to tell kinds apart by their endings.
    """

    media_type: str
    data: bytes
    name: str = ""
