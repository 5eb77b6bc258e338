"""The pages of the interface load nothing from other hosts and run no script inside HTML."""

import hashlib
import re
from html.parser import HTMLParser
from pathlib import Path

import pytest
from fastapi.testclient import TestClient

from service.doors.http.documentation import STATIC
from service.doors.http.problem_kinds import KINDS
from tests.doors.http.fakes import FakeHouse, client_of, fake_app

PAGES = ("/", "/docs", "/problems", *(kind.address for kind in KINDS.values()))


class References(HTMLParser):
    """Collects what a page loads, where it leads, and whether it holds scripts or styles."""

    def __init__(self) -> None:
        """Begin with nothing."""
        super().__init__()
        self.loaded: list[str] = []
        self.links: list[str] = []
        self.inline: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Take note of one element."""
        values = dict(attrs)
        self.inline += [name for name in values if name.startswith("on") or name == "style"]
        if tag == "a":
            self.links.append(values["href"] or "")
        elif tag == "style" or (tag == "script" and "src" not in values):
            self.inline.append(tag)
        else:
            self.loaded += [text for name in ("src", "href") if (text := values.get(name))]


def references(html: str) -> References:
    """Return what ``html`` refers to."""
    found = References()
    found.feed(html)
    return found


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    """Return a client of the door."""
    return client_of(fake_app(FakeHouse(), tmp_path))


@pytest.mark.parametrize("path", PAGES)
def test_page_refers_to_no_foreign_origin(client: TestClient, path: str) -> None:
    """It must work without a network, and tell nobody that it is read."""
    page = references(client.get(path).text)

    for reference in [*page.loaded, *page.links]:
        assert reference == "data:," or re.match(r"/(?!/)", reference), reference
    assert page.inline == []


@pytest.mark.parametrize("path", PAGES)
def test_everything_that_a_page_refers_to_is_there(client: TestClient, path: str) -> None:
    """No dead links, no missing files."""
    page = references(client.get(path).text)

    for reference in [*page.loaded, *page.links]:
        if reference != "data:,":
            assert client.get(reference).status_code == 200, reference


@pytest.mark.parametrize("path", PAGES)
def test_browser_is_told_to_load_from_here_alone(client: TestClient, path: str) -> None:
    """Whatever a script tries, the browser sends nothing to another host."""
    policy = client.get(path).headers["Content-Security-Policy"]
    directives = dict(part.strip().partition(" ")[::2] for part in policy.split(";"))

    assert directives["default-src"] == "'self'"
    # Whatever else is allowed is this host, nothing, or pictures inside of the style sheet.
    for name, value in directives.items():
        assert set(value.split()) <= {"'self'", "'none'", "data:"}, name
    assert "data:" not in directives.get("script-src", "")


def test_our_own_scripts_and_styles_name_no_host() -> None:
    """What we wrote ourselves has not even an address in it."""
    for name in ("interface.js", "pages.css"):
        assert "//" not in re.sub(r"^\s*//.*$", "", (STATIC / name).read_text(), flags=re.MULTILINE)


def test_validator_of_the_interactive_page_is_off() -> None:
    """By default that page sends the description to a host that checks it."""
    assert re.search(r"validatorUrl:\s*null", (STATIC / "interface.js").read_text())


@pytest.mark.parametrize(
    ("name", "sha256"),
    [
        (
            "swagger-ui-bundle.js",
            "e6a898692f2d768e807c3ba4626068a69a2c5dd960dd6c76f3e4d3a3de180af2",
        ),
        ("swagger-ui.css", "5ed08757e53da3e026d6cbecc61fe5d43585c9560b302d534ad56692519a273d"),
    ],
)
def test_files_of_others_are_as_they_came(name: str, sha256: str) -> None:
    """Files of swagger-ui-dist 5.35.0, unchanged: whoever updates them changes this line, too."""
    assert hashlib.sha256((STATIC / name).read_bytes()).hexdigest() == sha256


def test_files_of_others_have_their_licences_beside_them() -> None:
    """The licence has to travel with the files, also in the installed package."""
    assert "Apache License" in (STATIC / "swagger-ui.LICENSE.txt").read_text()
    assert (STATIC / "swagger-ui.NOTICE.txt").exists()
    assert (STATIC / "swagger-ui-bundle.js.LICENSE.txt").exists()
