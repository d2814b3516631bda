"""What every response carries, and what never reaches the app: the outermost layer, plain ASGI."""

import logging
from collections.abc import Callable

from starlette.datastructures import MutableHeaders
from starlette.responses import Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

log = logging.getLogger("duskvalve")

MAX_BODY_BYTES = 256 * 1024
MAX_QUERY_BYTES = 32 * 1024

SECURITY_HEADERS = {
    "Content-Security-Policy": "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; "
    "connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'; manifest-src 'self'",
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Permissions-Policy": "camera=(), geolocation=(), microphone=(), payment=(), usb=()",
}

Refuse = Callable[[Scope, int, str], Response]


class Guard:
    """Security headers on every response, limits on address and declared body, HEAD as GET without a body.

    It stands outside the framework, because some refusals of the framework never pass through its own middleware.
    """

    def __init__(self, app: ASGIApp, refuse: Refuse) -> None:
        """Wrap `app`; `refuse` makes the response for a status and a sentence."""
        self.app = app
        self.refuse = refuse

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """One request, or the lifespan."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        headless = scope["method"] == "HEAD"
        if headless:
            scope = {**scope, "method": "GET"}
        started = False

        async def guarded(message: Message) -> None:
            nonlocal started
            if message["type"] == "http.response.start":
                started = True
                headers = MutableHeaders(scope=message)
                for name, value in SECURITY_HEADERS.items():
                    headers[name] = value
            elif headless and message["type"] == "http.response.body":
                message = {**message, "body": b""}
            await send(message)

        refused = self._too_much(scope)
        if refused is not None:
            await refused(scope, receive, guarded)
            return
        try:
            await self.app(scope, receive, guarded)
        except Exception:
            log.exception("%s %s failed", scope["method"], scope["path"])
            if not started:
                await self.refuse(scope, 500, SORRY)(scope, receive, guarded)

    def _too_much(self, scope: Scope) -> Response | None:
        if len(scope.get("query_string", b"")) > MAX_QUERY_BYTES:
            sentence = (
                f"the part after the question mark has more than the {MAX_QUERY_BYTES // 1024} kB taken; use POST"
            )
            return self.refuse({**scope, "query_string": b""}, 414, sentence)
        declared = next((value for name, value in scope["headers"] if name == b"content-length"), b"0")
        if declared.isdigit() and int(declared[:20]) > MAX_BODY_BYTES:
            return self.refuse(scope, 413, TOO_LARGE)
        return None


TOO_LARGE = f"the body has more than the {MAX_BODY_BYTES // 1024} kB taken"
SORRY = "the program made a mistake; it is written in the log, and nothing you typed is at fault"
