"""What surrounds the application: HEAD for every GET, and one spelling of every path."""

from starlette.types import ASGIApp, Message, Receive, Scope, Send


class Edge:
    """Answers HEAD like GET without the body, and a path with slashes at its end like one without."""

    def __init__(self, app: ASGIApp) -> None:
        self._app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Serve one connection."""
        if scope["type"] != "http":
            await self._app(scope, receive, send)
            return
        normal = {**scope, "path": scope["path"].rstrip("/") or "/"}
        if scope["method"] != "HEAD":
            await self._app(normal, receive, send)
            return

        async def without_body(message: Message) -> None:
            await send({**message, "body": b""} if message["type"] == "http.response.body" else message)

        await self._app({**normal, "method": "GET"}, receive, without_body)
