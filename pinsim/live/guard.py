"""Who may ask: this machine only, under its own address, with the token of this run.

A server on 127.0.0.1 can be reached by every program of the machine, and by every page that its
browser shows. So a request must name the server by its own address (a foreign name that was made to
point here is refused), must not come from another page, and must carry a secret that only the opened
address holds.
"""

import hmac
import secrets
from collections.abc import Awaitable, Callable, MutableMapping
from http.cookies import CookieError, SimpleCookie
from threading import Lock
from typing import Any
from urllib.parse import parse_qs

from pinsim.live.refused import RefusedError

Message = MutableMapping[str, Any]
Receive = Callable[[], Awaitable[Message]]
Send = Callable[[Message], Awaitable[None]]
App = Callable[[Message, Receive, Send], Awaitable[None]]

TOKEN_HEADER = "x-pinsim-token"
POLICY = (
    "default-src 'self'; script-src 'self'; style-src 'self'; img-src 'self' blob: data:; "
    "connect-src 'self'; font-src 'self'; object-src 'none'; base-uri 'none'; form-action 'none'; "
    "frame-ancestors 'none'"
)
HEADERS = (
    (b"content-security-policy", POLICY.encode()),
    (b"cache-control", b"no-store"),
    (b"x-content-type-options", b"nosniff"),
    (b"x-frame-options", b"DENY"),
    (b"referrer-policy", b"no-referrer"),
    (b"cross-origin-opener-policy", b"same-origin"),
    (b"cross-origin-resource-policy", b"same-origin"),
)
_AGAIN = (
    "this page belongs to a pinsim that asks for its own address; open the one that 'pinsim live' "
    "printed, whole."
)
_PAGE = f"""<!doctype html><html lang="en"><meta charset="utf-8"><title>pinsim</title>
<p>Not opened: {_AGAIN}</p></html>"""


class Keys:
    """The secrets of one run: a token, and codes that open the page once.

    The browser is started with a code, as other users of the machine can see how programs are started.
    """

    def __init__(self) -> None:
        self.token = secrets.token_urlsafe(32)
        self._codes: set[str] = set()
        self._lock = Lock()

    def new_code(self) -> str:
        """Return a code that opens the page once."""
        code = secrets.token_urlsafe(32)
        with self._lock:
            self._codes.add(code)
        return code

    def is_token(self, text: str) -> bool:
        """Tell whether a text is the token, in a time that tells nothing else."""
        return hmac.compare_digest(text.encode(), self.token.encode())

    def opens(self, query: bytes) -> bool:
        """Tell whether a query holds the token or an unused code, which is then used."""
        try:
            asked = parse_qs(query.decode("ascii"), max_num_fields=8)
        except ValueError:
            return False
        token, code = (asked.get(name, [""])[0] for name in ("token", "once"))
        if self.is_token(token):
            return True
        with self._lock:
            known = [one for one in self._codes if hmac.compare_digest(one.encode(), code.encode())]
            self._codes.difference_update(known)
        return bool(known)


class Guard:
    """Lets only those requests through that come from this run's own page."""

    def __init__(self, app: App, *, keys: Keys, port: int) -> None:
        self._app = app
        self._keys = keys
        # A browser leaves the port of the web out.
        ends = (f":{port}", "") if port == 80 else (f":{port}",)
        self._hosts = {f"{name}{end}" for name in ("127.0.0.1", "localhost") for end in ends}
        self._cookie = f"pinsim-{port}"  # cookies know no ports

    async def __call__(self, scope: Message, receive: Receive, send: Send) -> None:
        """Answer, or hand on."""
        if scope["type"] == "lifespan":
            await self._app(scope, receive, send)
            return
        if scope["type"] != "http":  # nothing here speaks by websocket
            await send({"type": "websocket.close", "code": 1008})
            return

        async def with_headers(message: Message) -> None:
            if message["type"] == "http.response.start":
                own = {name for name, _ in HEADERS}
                given = [one for one in message.get("headers", ()) if one[0].lower() not in own]
                message["headers"] = [*given, *HEADERS]
            await send(message)

        why = self._wrong(scope)
        if why is None and scope["path"] == "/open" and scope["method"] == "GET":
            if self._keys.opens(scope["query_string"]):
                await _answer(with_headers, 303, b"", self._opened())
                return
            why = _AGAIN
        elif why is None and not self._knows(scope):
            why = _AGAIN
        if why is None:
            await self._app(scope, receive, with_headers)
        elif scope["path"] in ("/", "/open"):
            body, kind = _PAGE.encode(), b"text/html; charset=utf-8"
            await _answer(with_headers, 403, body, [(b"content-type", kind)])
        else:
            await refuse(with_headers, RefusedError(why, status=403))

    def _opened(self) -> list[tuple[bytes, bytes]]:
        cookie = f"{self._cookie}={self._keys.token}; HttpOnly; SameSite=Strict; Path=/"
        # A fragment, the state of the page, goes on with the browser.
        return [(b"location", b"/"), (b"set-cookie", cookie.encode())]

    def _wrong(self, scope: Message) -> str | None:
        """Return why a request does not come from our own page, or None."""
        hosts = _headers(scope, b"host")
        if len(hosts) != 1 or hosts[0] not in self._hosts:
            return "this server answers under its own address only: 127.0.0.1 and its port."
        origins = _headers(scope, b"origin")
        if any(origin != f"http://{hosts[0]}" for origin in origins):
            return "another page asked; only pinsim's own page may."
        sites = _headers(scope, b"sec-fetch-site")
        if scope["path"] != "/open" and any(one not in ("same-origin", "none") for one in sites):
            return "another page asked; only pinsim's own page may."
        return None

    def _knows(self, scope: Message) -> bool:
        if any(self._keys.is_token(one) for one in _headers(scope, TOKEN_HEADER.encode())):
            return True
        for text in _headers(scope, b"cookie"):
            try:
                found = SimpleCookie(text).get(self._cookie)
            except CookieError:
                continue
            if found is not None and self._keys.is_token(found.value):
                return True
        return False


def _headers(scope: Message, name: bytes) -> list[str]:
    return [value.decode("latin-1") for key, value in scope["headers"] if key.lower() == name]


async def _answer(send: Send, status: int, body: bytes, headers: list[tuple[bytes, bytes]]) -> None:
    length = (b"content-length", str(len(body)).encode())
    await send({"type": "http.response.start", "status": status, "headers": [*headers, length]})
    await send({"type": "http.response.body", "body": body})


async def refuse(send: Send, problem: RefusedError) -> None:
    """Answer with a refusal as JSON."""
    import json

    body = json.dumps(problem.plain()).encode()
    await _answer(send, problem.status, body, [(b"content-type", b"application/json")])
