"""What stands before every answer: own machine only, reading only, and headers that keep the browser strict."""

from __future__ import annotations

from starlette.datastructures import Headers, MutableHeaders
from starlette.responses import PlainTextResponse
from starlette.types import ASGIApp, Message, Receive, Scope, Send

# A page elsewhere whose name is made to point here would bring its own name along.
HOSTS = {"127.0.0.1", "localhost", "[::1]"}
HEADERS = {
    "content-security-policy": (
        "default-src 'self'; base-uri 'none'; object-src 'none'; form-action 'self'; frame-ancestors 'none'"
    ),
    "x-content-type-options": "nosniff",
    "x-frame-options": "DENY",
    "referrer-policy": "no-referrer",
    "cross-origin-opener-policy": "same-origin",
    "cross-origin-resource-policy": "same-origin",
    "permissions-policy": "camera=(), geolocation=(), microphone=()",
    "cache-control": "no-store",
}
_READING = {"GET", "HEAD"}


class Guard:
    """Lets GET and HEAD through to an application, asked under a name of this machine."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Answers itself or passes on."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        refusal = _refusal(scope)
        await (refusal or self.app)(scope, receive, _with_headers(send))


def _refusal(scope: Scope) -> PlainTextResponse | None:
    if scope["method"] not in _READING:
        return PlainTextResponse("This page only reads.\n", 405, {"allow": "GET, HEAD"})
    host = Headers(scope=scope).get("host", "")
    name = host if host.endswith("]") else host.rsplit(":", 1)[0]
    if name not in HOSTS:
        return PlainTextResponse("This page answers on this machine only.\n", 400)
    return None


def _with_headers(send: Send) -> Send:
    async def sending(message: Message) -> None:
        if message["type"] == "http.response.start":
            headers = MutableHeaders(scope=message)
            for name, value in HEADERS.items():
                headers[name] = value
        await send(message)

    return sending
