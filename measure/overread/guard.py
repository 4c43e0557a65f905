"""Who may talk to the page's server: the browser that was given the address, and nobody else.

The server listens on this machine alone, yet any web page open in the same browser could send
requests to it, and a foreign name can be made to point here (DNS rebinding). So every request
must name this host and port; one that comes from a page must come from ours; and all but the
first must bear the cookie that the first, with its secret in the address, was given.
"""

import secrets
from collections.abc import Awaitable, Callable

from starlette.requests import Request
from starlette.responses import PlainTextResponse, RedirectResponse, Response

HOST = "127.0.0.1"
LARGEST_BODY = 1 << 20
POLICY = (
    "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self'; "
    "connect-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
)
_HEADERS = {
    "Content-Security-Policy": POLICY,
    "X-Content-Type-Options": "nosniff",
    "Referrer-Policy": "no-referrer",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cache-Control": "no-store",
}

Next = Callable[[Request], Awaitable[Response]]


class Guard:
    """Lets through what comes from our own page in the browser that was given the address."""

    def __init__(self, port: int) -> None:
        """A new secret for each start."""
        self.token = secrets.token_urlsafe(32)
        self._hosts = (f"{HOST}:{port}", f"localhost:{port}")
        self._cookie = f"overread_{port}"  # cookies do not tell ports apart

    @property
    def address(self) -> str:
        """The address to open, with the secret in it."""
        return f"http://{self._hosts[0]}/?token={self.token}"

    async def __call__(self, request: Request, call_next: Next) -> Response:
        """The answer to a request, or a refusal."""
        response = self._refusal(request) or self._welcome(request)
        if response is None:
            response = await call_next(request)
        response.headers.update(_HEADERS)
        return response

    def _refusal(self, request: Request) -> Response | None:
        host, origin = request.headers.get("host", ""), request.headers.get("origin")
        if host not in self._hosts:
            return PlainTextResponse("This server answers to its own address alone.", 403)
        writes = request.method not in ("GET", "HEAD")
        if (origin is None and writes) or (origin is not None and origin != f"http://{host}"):
            return PlainTextResponse("This request comes from another page.", 403)
        if request.headers.get("sec-fetch-site", "none") not in ("same-origin", "none"):
            return PlainTextResponse("This request comes from another page.", 403)
        if writes and not _short(request.headers.get("content-length", "")):
            return PlainTextResponse("This request is too large.", 413)
        return None

    def _welcome(self, request: Request) -> Response | None:
        """The cookie for the one who knows the secret; a refusal for who has neither."""
        token = request.query_params.get("token")
        if request.url.path == "/" and token is not None and self._known(token):
            response = RedirectResponse("/", 303)
            response.set_cookie(self._cookie, self.token, httponly=True, samesite="strict")
            return response
        if self._known(request.cookies.get(self._cookie, "")):
            return None
        message = "Open the address that the command printed: it holds the key to this page."
        return PlainTextResponse(message, 403)

    def _known(self, token: str) -> bool:
        return secrets.compare_digest(token.encode(), self.token.encode())


def _short(length: str) -> bool:
    """Whether a body says how long it is, and is not too long."""
    return length.isascii() and length.isdigit() and int(length) <= LARGEST_BODY
