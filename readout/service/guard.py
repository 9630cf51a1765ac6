"""Who may ask: only pages and programs on this machine.

A page from elsewhere could make the browser send requests here, or have its own name resolve to
this machine. So the Host must be a loopback name with our port, and an Origin, where a browser
sends one, must be this very address. Requests without an Origin (a picture, a script, a frame that
a page elsewhere asks for) are known by what the browser says of their site (W3C, Fetch Metadata
Request Headers); a link from elsewhere to the dashboard may be followed. The answer's headers
forbid pages to fetch anything outside, and other pages to show ours.
"""

from __future__ import annotations

from starlette.datastructures import Headers, MutableHeaders
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from readout.service.problems import problem_response

LOOPBACK = ("127.0.0.1", "localhost", "[::1]")
HEADERS = {
    "Content-Security-Policy": (
        "default-src 'self'; img-src 'self' data: blob:; "
        "style-src 'self' 'unsafe-inline'; connect-src 'self'; frame-ancestors 'none'"
    ),
    "Cross-Origin-Resource-Policy": "same-origin",
    "X-Content-Type-Options": "nosniff",
}

ELSEWHERE = "requests from pages of another address are refused"


class Guard:
    """ASGI middleware around everything, the WebSocket included."""

    def __init__(self, app: ASGIApp, *, port: int) -> None:
        self._app = app
        self._hosts = {f"{name}:{port}" for name in LOOPBACK}
        if port == 80:  # browsers leave the usual port away
            self._hosts |= set(LOOPBACK)

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        if scope["type"] not in ("http", "websocket"):
            await self._app(scope, receive, send)
            return
        refusal = self._refusal(Headers(scope=scope), scope["path"])
        if refusal is None:
            await self._app(scope, receive, _with_headers(send))
        elif scope["type"] == "websocket":
            await receive()  # the request to connect; closing before accepting answers it 403
            await send({"type": "websocket.close", "code": 1008, "reason": refusal[1][:120]})
        else:
            await problem_response(*refusal)(scope, receive, _with_headers(send))

    def _refusal(self, headers: Headers, path: str) -> tuple[int, str] | None:
        hosts = headers.getlist("host")
        if len(hosts) != 1 or hosts[0].lower() not in self._hosts:
            here = ", ".join(sorted(self._hosts))
            return 421, f"this address is not served here: use one of {here}"
        origins = headers.getlist("origin")
        if any(origin.lower() != f"http://{hosts[0].lower()}" for origin in origins):
            return 403, ELSEWHERE
        sites = set(headers.getlist("sec-fetch-site"))
        if sites <= {"same-origin", "none"} or _follows_link(headers, path):
            return None
        return 403, ELSEWHERE


def _follows_link(headers: Headers, path: str) -> bool:
    """True for somebody who opens the dashboard, in a tab of its own, by a link elsewhere."""
    manner = headers.get("sec-fetch-mode"), headers.get("sec-fetch-dest")
    return manner == ("navigate", "document") and not path.startswith("/api")


def _with_headers(send: Send) -> Send:
    async def sending(message: Message) -> None:
        if message["type"] == "http.response.start":
            headers = MutableHeaders(scope=message)
            for name, value in HEADERS.items():
                headers.setdefault(name, value)
        await send(message)

    return sending
