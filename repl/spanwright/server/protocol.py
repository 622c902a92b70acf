"""The wire: what arrives damaged is answered or logged, and never ends the server."""

from __future__ import annotations

import asyncio
import logging
import re
import sys
import threading
from collections.abc import Iterator
from typing import Any

from lsprotocol import types
from pygls.exceptions import JsonRpcException, JsonRpcInvalidParams
from pygls.io_ import StdinAsyncReader, StdoutWriter, run_async
from pygls.lsp.server import LanguageServer
from pygls.protocol import LanguageServerProtocol
from pygls.protocol.language_server import lsp_method

READ_LIMIT = 1 << 26  # bytes of one message, or of one header line over TCP
DROPPED = b"Dropped: yes\r\n"
LOOPBACK = "127.0.0.1"
LOGGER = logging.getLogger("spanwright.server")


class Refused(JsonRpcException):
    """A request that is understood and cannot be granted; the client shows the message."""

    CODE = -32803


class Protocol(LanguageServerProtocol):
    """The protocol, with an answer to every request whose parameters make no sense."""

    def structure_message(self, data: Any) -> Any:
        """Read a message; a request that cannot be read is answered with -32602."""
        try:
            return super().structure_message(data)
        except JsonRpcException as error:
            number = data.get("id")
            if "method" in data and isinstance(number, int | str):
                refusal = types.ResponseError(
                    code=JsonRpcInvalidParams.CODE,
                    message=f"the parameters of {data['method']} cannot be read",
                )
                self._send_response(number, None, refusal)
            raise error

    def handle_message(self, message: Any) -> None:
        """Handle a message; what is no message at all is reported, not raised."""
        if getattr(message, "jsonrpc", None) != self.VERSION:
            raise JsonRpcInvalidParams(message="a message that is not JSON-RPC 2.0")
        super().handle_message(message)


    @lsp_method(types.TEXT_DOCUMENT_DID_CHANGE)
    def lsp_text_document__did_change(
        self, params: types.DidChangeTextDocumentParams
    ) -> Iterator[Any]:
        """Leave the text to the server's own documents, which read again only what changed."""
        yield self.fm.features[types.TEXT_DOCUMENT_DID_CHANGE], (params,), None


class RobustServer(LanguageServer):
    """A server that tells its own faults in the log of the client's window."""

    def report_server_error(self, error: Exception, source: Any) -> None:
        """Log a fault where the user of an editor can find it; a refusal is no fault."""
        if isinstance(error, Refused):
            return
        message = f"{getattr(source, '__name__', 'fault')}: {type(error).__name__}: {error}"
        self.window_log_message(types.LogMessageParams(types.MessageType.Error, message[:2000]))

    def serve_stdio(self) -> None:
        """Serve the client at the other end of standard input and output, until it goes away."""
        content, sys.stdout = sys.stdout.buffer, sys.stderr  # nothing else may write there
        self._stop_event = threading.Event()
        self.protocol.set_writer(_Writer(StdoutWriter(content)))
        reader = _Reader(StdinAsyncReader(sys.stdin.buffer, self.thread_pool))
        try:
            asyncio.run(self._serve(reader, self._stop_event))
        except (BrokenPipeError, KeyboardInterrupt):
            pass  # nobody is left to be told
        finally:
            self.shutdown()  # type: ignore[no-untyped-call]

    async def _serve(self, reader: _Reader, stop: threading.Event) -> None:
        await run_async(
            stop_event=stop,
            reader=reader,
            protocol=self.protocol,
            logger=LOGGER,
            error_handler=self.report_server_error,
        )

    def serve_tcp(self, port: int) -> None:
        """Serve one client on the loopback interface, and end when it goes away."""
        asyncio.run(self._serve_tcp(port))

    async def _serve_tcp(self, port: int) -> None:
        stop = threading.Event()
        self._stop_event = stop
        is_over = asyncio.Event()

        async def connected(
            reader: asyncio.StreamReader, writer: asyncio.StreamWriter
        ) -> None:
            listener.close()  # one client, whose documents are its own
            self.protocol.set_writer(_Writer(writer))
            try:
                await self._serve(_Reader(reader), stop)
            finally:
                writer.close()
                is_over.set()

        listener = await asyncio.start_server(connected, LOOPBACK, port, limit=READ_LIMIT)
        host, real_port = listener.sockets[0].getsockname()[:2]
        LOGGER.warning("listening on %s:%s", host, real_port)
        await is_over.wait()


_LENGTH = re.compile(rb"Content-Length: *([0-9]+)\s*", re.IGNORECASE)


class _Reader:
    """A stream whose end, and whose nonsense, looks like the end of a file or an empty header."""

    def __init__(self, stream: Any) -> None:
        self._stream = stream

    async def readline(self) -> bytes:
        """The next header line; one that asks for more than a message can hold is dropped."""
        try:
            line: bytes = await self._stream.readline()
        except ValueError:
            return DROPPED
        except ConnectionError:
            return b""
        length = _LENGTH.fullmatch(line)
        if length is None:
            return line
        digits = length[1].lstrip(b"0")
        if not digits or len(digits) > 9 or int(digits) > READ_LIMIT:
            return DROPPED
        return b"Content-Length: " + digits + b"\r\n"

    async def readexactly(self, n: int) -> bytes:
        """So many bytes; none at the end."""
        try:
            body: bytes = await self._stream.readexactly(n)
        except (asyncio.IncompleteReadError, ConnectionError):
            return b""
        return body


class _Writer:
    """A stream that is written to as long as somebody reads it."""

    def __init__(self, stream: Any) -> None:
        self._stream = stream
        self._is_closed = False

    def write(self, data: bytes) -> None:
        """Write a message; behind the end nothing is written."""
        if not self._is_closed:
            self._stream.write(data)

    def close(self) -> None:
        """End the stream."""
        self._is_closed = True
        self._stream.close()
