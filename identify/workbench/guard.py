"""What stands before every page: which host, which origin, how large, and the headers every answer carries.

A page of another site must not reach us by a name it controls (DNS rebinding: the Host header), must not send forms in the
analyst's name (the Origin header), and must not read or frame an answer (the headers).
"""

from __future__ import annotations

import asyncio
import re
from collections.abc import Awaitable, Callable, Iterable, MutableMapping
from contextlib import suppress
from typing import Any

Scope = MutableMapping[str, Any]
Message = MutableMapping[str, Any]
Receive = Callable[[], Awaitable[Message]]
Send = Callable[[Message], Awaitable[None]]
App = Callable[[Scope, Receive, Send], Awaitable[None]]

MAX_UPLOAD_BYTES = 256 * 2**20
MAX_FORM_BYTES = 2**20
READ_OFF_S = 2.0
UPLOAD_PATH = re.compile(r"(/api)?/(uploads|runs/\d+/again)")
SAFE_METHODS = ("GET", "HEAD", "OPTIONS")
HEADERS = {
    "content-security-policy": "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self' data:;"
    " connect-src 'self'; form-action 'self'; frame-ancestors 'none'; base-uri 'none'",
    "x-content-type-options": "nosniff",
    "x-frame-options": "DENY",
    # With "no-referrer" a browser would send forms with the origin "null".
    "referrer-policy": "same-origin",
    "cross-origin-opener-policy": "same-origin",
    "cross-origin-resource-policy": "same-origin",
    "permissions-policy": "camera=(), microphone=(), geolocation=()",
    "cache-control": "no-store",
}


class Guard:
    """Checks in front of an application.

    Parameters
    ----------
    app : ASGI application
    hosts : iterable of str
        Values of the Host header that are ours, with port.
    scheme : str
        Of our own origin.
    """

    def __init__(self, app: App, *, hosts: Iterable[str], scheme: str = "http") -> None:
        self._app = app
        self._hosts = frozenset(host.lower() for host in hosts)
        self._scheme = scheme

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Answer a request, or refuse it.

        Whatever is answered before all of a request has arrived (a refusal, no such page), the rest is taken and forgotten
        before the answer ends: a connection closed on unread bytes is reset, and the sender never sees our answer.
        """
        if scope["type"] != "http":
            if scope["type"] == "lifespan":
                await self._app(scope, receive, send)
            return  # there are no web sockets here

        is_read = scope["method"] in SAFE_METHODS

        async def receive_and_note() -> Message:
            nonlocal is_read
            message = await receive()
            is_read = is_read or not message.get("more_body", False)
            return message

        async def send_closed(message: Message) -> None:
            if message["type"] == "http.response.start":
                own = [(name, value) for name, value in message.get("headers", []) if name.decode() not in HEADERS]
                message["headers"] = own + [(name.encode(), value.encode()) for name, value in HEADERS.items()]
            elif not is_read and not message.get("more_body", False):
                await send({**message, "more_body": True})
                await _read_off(receive)
                message = {"type": "http.response.body", "body": b""}
            await send(message)

        refusal = self._refuse(scope)
        if refusal is None:
            await self._app(scope, receive_and_note, send_closed)
            return
        status, text = refusal
        body = text.encode()
        headers = [(b"content-type", b"text/plain; charset=utf-8"), (b"connection", b"close")]
        headers.append((b"content-length", str(len(body)).encode()))
        await send_closed({"type": "http.response.start", "status": status, "headers": headers})
        await send_closed({"type": "http.response.body", "body": body})

    def _refuse(self, scope: Scope) -> tuple[int, str] | None:
        headers: dict[str, list[str]] = {}
        for name, value in scope["headers"]:
            headers.setdefault(name.decode("latin-1").lower(), []).append(value.decode("latin-1"))
        hosts = headers.get("host", [])
        if len(hosts) != 1 or hosts[0].lower() not in self._hosts:
            return 421, "This address is not served here."
        if scope["method"] in SAFE_METHODS:
            return self._refuse_reading(headers)
        return self._refuse_origin(headers, hosts[0]) or _refuse_size(headers, scope["path"])

    def _refuse_reading(self, headers: dict[str, list[str]]) -> tuple[int, str] | None:
        site, mode = headers.get("sec-fetch-site", [""])[0], headers.get("sec-fetch-mode", [""])[0]
        if site in ("cross-site", "same-site") and mode != "navigate":
            return 403, "Another site may not read this."
        return None

    def _refuse_origin(self, headers: dict[str, list[str]], host: str) -> tuple[int, str] | None:
        origins = headers.get("origin", [])
        ours = f"{self._scheme}://{host.lower()}"
        if origins:
            is_ours = len(origins) == 1 and origins[0].lower() == ours
        else:
            is_ours = headers.get("sec-fetch-site") == ["same-origin"]
        return None if is_ours else (403, "Changes are taken from our own pages only (Origin header).")


async def _read_off(receive: Receive) -> None:
    """Take and forget what a request still sends, for a while."""
    with suppress(TimeoutError):
        async with asyncio.timeout(READ_OFF_S):
            while (await receive()).get("more_body", False):
                pass


def _refuse_size(headers: dict[str, list[str]], path: str) -> tuple[int, str] | None:
    limit = MAX_UPLOAD_BYTES if UPLOAD_PATH.fullmatch(path) else MAX_FORM_BYTES
    stated = headers.get("content-length", [])
    if len(stated) != 1 or not stated[0].isdecimal() or "transfer-encoding" in headers:
        return 411, "The length of the request must be stated."
    if len(stated[0]) > 15 or int(stated[0]) > limit:
        return 413, f"More than {limit // 2**20} MiB are not taken. Split the file, or use the command line."
    return None
