"""The routes: what the page may ask, and what it is answered. docs/live.md tells them all."""

import asyncio
import itertools
import json
import math
import os
import re
from collections.abc import Awaitable, Callable
from concurrent.futures import ThreadPoolExecutor
from functools import partial
from pathlib import Path
from typing import Any, TypeVar

from starlette.applications import Starlette
from starlette.exceptions import HTTPException
from starlette.requests import ClientDisconnect, Request
from starlette.responses import JSONResponse, Response
from starlette.routing import Route

from pinsim.errors import PinsimError
from pinsim.live.memory import give_back
from pinsim.live.refused import RefusedError, SupersededError, plain_line
from pinsim.live.work import Check, Desk, Lane

MOST_JSON_BYTES = 256 << 10
_PAGE = Path(__file__).with_name("page")
_KINDS = {
    ".html": "text/html; charset=utf-8",
    ".js": "text/javascript; charset=utf-8",
    ".css": "text/css; charset=utf-8",
    ".json": "application/json",
    ".svg": "image/svg+xml",
    ".png": "image/png",
    ".woff2": "font/woff2",
}
_LANE = re.compile(r"[A-Za-z0-9_-]{1,40}")
_NAMELESS = itertools.count()
# For what is quick, or waits for the disk; drawing has a thread of its own.
_POOL = ThreadPoolExecutor(8, thread_name_prefix="pinsim answers")
_CHUNK_S = 30.0  # a page that sends nothing for so long has gone

Result = TypeVar("Result")
Answer = Callable[[Request], Awaitable[Response]]


class Server:
    """The page's server. Everything heavy is loaded when `studio` is first asked for."""

    def __init__(self, studio: Callable[[], Any]) -> None:
        self._studio = studio
        self.pictures = Desk("pinsim pictures", at_rest=give_back)
        self.figures = Desk("pinsim figures", at_rest=give_back)
        self.files = Desk("pinsim files", at_rest=give_back)
        self.app = Starlette(
            routes=[
                Route("/api/start", _guarded(self.start), methods=["GET"]),
                Route("/api/parse", _guarded(self.parse), methods=["POST"]),
                Route("/api/check", _guarded(self.check), methods=["POST"]),
                Route("/api/picture", _guarded(self.picture), methods=["POST"]),
                Route("/api/numbers", _guarded(self.numbers), methods=["POST"]),
                Route("/api/curves", _guarded(self.curves), methods=["POST"]),
                Route("/api/difference", _guarded(self.difference), methods=["POST"]),
                Route("/api/point", _guarded(self.point), methods=["POST"]),
                Route("/api/design", _guarded(self.design), methods=["POST"]),
                Route("/api/open", _guarded(self.open), methods=["POST"]),
                Route("/api/photo", _guarded(self.photo), methods=["PUT"]),
                Route("/api/map", _guarded(self.map), methods=["PUT"]),
                Route("/api/file/{file_id}", _guarded(self.forget), methods=["DELETE"]),
                Route("/api/save", _guarded(self.save), methods=["POST"]),
                Route("/{name:path}", page_file, methods=["GET"]),
            ],
            exception_handlers={HTTPException: _no_such_route},
        )

    def end(self) -> None:
        """Stop all work."""
        for desk in (self.pictures, self.figures, self.files):
            desk.end(wait_s=3.0)

    async def studio(self) -> Any:
        """Return the studio, loaded."""
        return await _in_thread(self._studio)

    # Answers that need no drawing -------------------------------------------------------------

    async def start(self, request: Request) -> Response:
        """Tell the state to begin with, and everything that can be chosen."""
        studio = await self.studio()
        return _json(await _in_thread(studio.start))

    async def parse(self, request: Request) -> Response:
        """Tell what a typed text means."""
        given = await _body(request)
        field = given.get("field")
        studio = await self.studio()
        try:
            return _json(studio.parsed(given.get("kind"), given.get("text"), field))
        except PinsimError as problem:
            raise RefusedError(
                str(problem), field=field if isinstance(field, str) else None
            ) from None

    async def check(self, request: Request) -> Response:
        """Tell whether a state is possible, and of its scene."""
        given = await _body(request)
        studio = await self.studio()
        return _json(await _in_thread(studio.check, given.get("state")))

    async def point(self, request: Request) -> Response:
        """Tell direction and distance at a place of the picture."""
        given = await _body(request)
        studio = await self.studio()
        return _json(await _in_thread(studio.point, given))

    async def design(self, request: Request) -> Response:
        """Write the design as a file."""
        given = await _body(request)
        studio = await self.studio()
        return _json(await _in_thread(studio.design, given.get("state")))

    async def open(self, request: Request) -> Response:
        """Read a design's file."""
        given = await _body(request)
        studio = await self.studio()
        return _json(
            await _in_thread(studio.designs.opened, given.get("toml"), given.get("file_name"))
        )

    # Work for a desk --------------------------------------------------------------------------

    async def picture(self, request: Request) -> Response:
        """Draw the state."""
        given = await _body(request)
        studio = await self.studio()
        # What cannot be is refused at once, not after all that waits.
        ask = await _in_thread(studio.picture_asked, given)
        drawn = await self._done(
            request, self.pictures, given, lambda check: studio.draw(*ask, check)
        )
        return Response(
            drawn.body, media_type=drawn.media_type, headers={"X-Pinsim": json.dumps(drawn.about)}
        )

    async def numbers(self, request: Request) -> Response:
        """Tell the figures."""
        given = await _body(request)
        studio = await self.studio()
        if given.get("part") == "quick":
            return _json(await _in_thread(studio.numbers, given))
        return _json(
            await self._done(
                request, self.figures, given, lambda check: studio.numbers(given), "numbers"
            )
        )

    async def curves(self, request: Request) -> Response:
        """Tell contrast curves and point images."""
        given = await _body(request)
        studio = await self.studio()
        return _json(
            await self._done(
                request, self.figures, given, lambda check: studio.curves(given), "curves"
            )
        )

    async def difference(self, request: Request) -> Response:
        """Tell in words what two states do differently."""
        given = await _body(request)
        studio = await self.studio()
        return _json(await _in_thread(studio.difference, given))

    async def save(self, request: Request) -> Response:
        """Make a file to keep."""
        given = await _body(request)
        studio = await self.studio()
        ask = await _in_thread(studio.save_asked, given)
        body, name, notes = await self._done(
            request, self.files, {"lane": "save"}, lambda check: studio.save(*ask, check)
        )
        about = {"file_name": name, "notes": [plain_line(note) for note in notes]}
        return Response(
            body,
            media_type="application/octet-stream",
            headers={
                "Content-Disposition": f'attachment; filename="{name}"',
                "X-Pinsim": json.dumps(about),
            },
        )

    async def _done(
        self,
        request: Request,
        desk: Desk,
        given: dict[str, Any],
        work: Callable[[Check], Result],
        kind: str = "picture",
    ) -> Result:
        """Return what a desk makes; stop it when the page no longer waits."""
        job = desk.take(_lane(request, given, kind), work)
        made: asyncio.Future[Result] = asyncio.wrap_future(job.future)
        gone: asyncio.Future[None] = asyncio.ensure_future(_gone(request))
        both: set[asyncio.Future[Any]] = {made, gone}
        try:
            await asyncio.wait(both, return_when=asyncio.FIRST_COMPLETED)
            if not made.done():
                raise ClientDisconnect
            return made.result()
        finally:
            gone.cancel()
            if not made.done():
                desk.drop(job)
                made.add_done_callback(_forget)

    # Uploads ----------------------------------------------------------------------------------

    async def photo(self, request: Request) -> Response:
        """Take a photo in."""
        return await self._upload(request, "photo")

    async def map(self, request: Request) -> Response:
        """Take a distance map in."""
        return await self._upload(request, "map")

    async def _upload(self, request: Request, kind: str) -> Response:
        studio = await self.studio()
        most = studio.most_upload_bytes
        told = request.headers.get("content-length", "0")
        if not told.isdecimal() or len(told) > 15 or int(told) > most:
            raise RefusedError(_too_large(most), status=413)
        name = request.query_params.get("name", kind)[:200]
        entry, path = await _in_thread(studio.shelf.new_file, kind, name)
        try:
            await _receive(request, path, most)
            answer = await _in_thread(studio.taken_in, entry, path)
        except BaseException:
            path.unlink(missing_ok=True)
            raise
        return _json(answer)

    async def forget(self, request: Request) -> Response:
        """Forget an upload."""
        studio = await self.studio()
        await _in_thread(studio.shelf.remove, str(request.path_params["file_id"]))
        return _json({})


def _too_large(most: int) -> str:
    return (
        f"the file is larger than the {most >> 20} MB that the page takes; shrink it, or start "
        "pinsim live with it."
    )


async def _in_thread(work: Callable[..., Result], *arguments: Any) -> Result:
    """Return what a function returns, without making others wait for it."""
    return await asyncio.get_running_loop().run_in_executor(_POOL, partial(work, *arguments))


async def _receive(request: Request, path: Path, most: int) -> None:
    """Write what is sent to a new file, no more than `most` bytes."""
    received = 0
    handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(handle, "wb") as file:
        stream = request.stream()
        while True:
            try:
                chunk = await asyncio.wait_for(anext(stream, b""), _CHUNK_S)
            except TimeoutError:
                raise RefusedError("the file stopped coming; drop it again.", status=408) from None
            if not chunk:
                break
            received += len(chunk)
            if received > most:
                raise RefusedError(_too_large(most), status=413)
            try:
                await _in_thread(file.write, chunk)
            except OSError as problem:
                raise RefusedError(
                    f"the file cannot be kept: {problem.strerror}.", status=413
                ) from None
    if received == 0:
        raise RefusedError("the file is empty (0 bytes); copy it again.")


async def _gone(request: Request) -> None:
    """Return when the page has closed the connection."""
    while True:
        message = await request.receive()
        if message["type"] == "http.disconnect":
            return


def _forget(made: "asyncio.Future[Any]") -> None:
    """Look at what came of work nobody waits for, so that nothing is logged."""
    if not made.cancelled():
        made.exception()


def _lane(request: Request, given: dict[str, Any], kind: str) -> Lane:
    client = request.headers.get("x-pinsim-client", "")
    lane = given.get("lane", "now")
    if client and not _LANE.fullmatch(client):
        raise RefusedError("X-Pinsim-Client must be up to 40 letters and digits.", status=400)
    if not isinstance(lane, str) or not _LANE.fullmatch(lane):
        raise RefusedError("lane must be a short word of letters and digits.", status=400)
    # Who does not say which page it is has a lane of its own.
    return client or f"nameless {next(_NAMELESS)}", f"{kind} {lane}"


async def _body(request: Request) -> dict[str, Any]:
    """Return the JSON object of a request; RefusedError when it is none, or too long."""
    kind = request.headers.get("content-type", "").partition(";")[0].strip().lower()
    if kind != "application/json":
        raise RefusedError("send JSON, with Content-Type: application/json.", status=415)
    data = bytearray()
    async for chunk in request.stream():
        data += chunk
        if len(data) > MOST_JSON_BYTES:
            raise RefusedError("the request is far too long.", status=413)
    try:
        found = json.loads(data.decode("utf-8"), parse_constant=_no_constant)
    except (ValueError, RecursionError):
        raise RefusedError("the request is not JSON in UTF-8.", status=400) from None
    if not isinstance(found, dict):
        raise RefusedError("the request must be a JSON object.", status=400)
    return found


def _no_constant(name: str) -> float:
    raise ValueError(name)


def _json(value: Any) -> JSONResponse:
    return JSONResponse(_plain(value))


def _plain(value: Any) -> Any:
    """Return a value as JSON takes it: infinity is a word, and what is no number is null."""
    if isinstance(value, dict):
        return {key: _plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(one) for one in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None if math.isnan(value) else "infinity" if value > 0 else "-infinity"
    return value


def _guarded(answer: Answer) -> Answer:
    """Return a route's function whose every failure is an answer in JSON, one line."""

    async def guarded(request: Request) -> Response:
        try:
            return await answer(request)
        except Exception as problem:
            return _answer_for(problem)

    return guarded


def _answer_for(problem: Exception) -> Response:
    if isinstance(problem, ClientDisconnect):
        return Response(status_code=499)  # nobody reads it
    if isinstance(problem, SupersededError):
        told = RefusedError("a newer request came.", status=409).plain()
        return JSONResponse({**told, "superseded": True}, status_code=409)
    if isinstance(problem, MemoryError):
        text = "that needs more memory than there is; ask for a smaller picture."
        problem = RefusedError(text, status=413)
    elif isinstance(problem, PinsimError):
        problem = RefusedError(str(problem))
    elif not isinstance(problem, RefusedError):
        reason = str(problem) or type(problem).__name__
        problem = RefusedError(f"something failed that should not: {reason}", status=500)
    return JSONResponse(problem.plain(), status_code=problem.status)


async def _no_such_route(request: Request, problem: Exception) -> Response:
    status = problem.status_code if isinstance(problem, HTTPException) else 500
    return JSONResponse(
        RefusedError("nothing is here by that address.").plain(), status_code=status
    )


async def page_file(request: Request) -> Response:
    """Hand out a file of the page; only those that the package holds have a name here."""
    name = str(request.path_params["name"]) or "index.html"
    known = {
        path.relative_to(_PAGE).as_posix(): path
        for path in _PAGE.rglob("*")
        if path.is_file() and path.suffix in _KINDS
    }
    if name not in known:
        raise HTTPException(404)
    body = await _in_thread(known[name].read_bytes)
    return Response(body, headers={"Content-Type": _KINDS[known[name].suffix]})
