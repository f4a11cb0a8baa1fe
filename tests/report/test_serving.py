"""The report's folder, served to this machine alone."""

import threading
import urllib.error
import urllib.request

import pytest

from skykiln.errors import FileError
from skykiln.report.serving import server_of


@pytest.fixture
def folder(tmp_path):
    report = tmp_path / "report"
    report.mkdir()
    (report / "index.html").write_text("the page")
    (tmp_path / "secret.txt").write_text("not for readers")
    return report


def test_page_is_served_on_the_loopback_address_and_nothing_beside_it(folder):
    with server_of(folder, 0) as server:
        threading.Thread(target=server.serve_forever, daemon=True).start()
        assert server.server_address[0] == "127.0.0.1"
        address = f"http://127.0.0.1:{server.server_port}"
        assert urllib.request.urlopen(address).read() == b"the page"
        with pytest.raises(urllib.error.HTTPError, match="404"):
            urllib.request.urlopen(f"{address}/%2e%2e/secret.txt")
        server.shutdown()


def test_taken_port_and_missing_page_are_told(folder, tmp_path):
    with server_of(folder, 0) as server, pytest.raises(FileError, match="is taken; name another"):
        server_of(folder, server.server_port)
    with pytest.raises(FileError, match="run skykiln bake"):
        server_of(tmp_path / "nowhere", 0)
