"""The report's folder served to this machine's own browsers, for pages that may not read file:// paths."""

import errno
import http.server
from functools import partial
from pathlib import Path

from skykiln.errors import FileError

HOST = "127.0.0.1"


def serve(folder: Path, port: int):
    """Serve a folder on this machine alone, until interrupted. Port 0: any that is free.

    Raises: FileError where there is no page, or the port is taken
    """
    with server_of(folder, port) as server:
        print(f"http://{HOST}:{server.server_port}/ (Ctrl-C ends)", flush=True)
        server.serve_forever()


def server_of(folder: Path, port: int) -> http.server.ThreadingHTTPServer:
    """The server, bound but not yet at work."""
    if not (folder / "index.html").is_file():
        raise FileError(f"{folder}/index.html: no report is there; run skykiln bake, or skykiln report")
    try:
        return http.server.ThreadingHTTPServer((HOST, port), partial(_Quiet, directory=str(folder)))
    except OSError as error:
        cause = "is taken" if error.errno == errno.EADDRINUSE else f"can't be used: {error.strerror}"
        raise FileError(f"port {port} of {HOST} {cause}; name another after --serve") from error


class _Quiet(http.server.SimpleHTTPRequestHandler):
    def log_message(self, format, *arguments):
        """Nothing: a page has hundreds of pictures."""

    def end_headers(self):
        self.send_header("Cache-Control", "no-cache")  # tomorrow's page has the same address
        super().end_headers()
