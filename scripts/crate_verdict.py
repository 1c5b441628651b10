"""The verdict of the RO-Crate validator on an unpacked crate; for `scripts/validate_crate`."""

from __future__ import annotations

import importlib.util
import io
import sys
from pathlib import Path

import requests
from requests.adapters import BaseAdapter
from rocrate_validator.models import Severity
from rocrate_validator.services import ValidationSettings, validate
from rocrate_validator.utils.http import HttpRequester
from urllib3 import HTTPResponse

CONTEXT = "https://w3id.org/ro/crate/1.1/context"
PROFILES = ("ro-crate-1.1", "process-run-crate-0.5", "workflow-run-crate-0.5")


class Shelf(BaseAdapter):
    """Answers the one request from a file."""

    def __init__(self, content: bytes) -> None:
        super().__init__()
        self._content = content

    def send(self, request, *args, **kwargs):
        response = requests.Response()
        response.request, response.url = request, request.url
        response.status_code = 200
        headers = {"Content-Type": "application/ld+json"}
        response.raw = HTTPResponse(
            io.BytesIO(self._content), headers, 200, preload_content=False, request_url=CONTEXT
        )
        response.headers.update(headers)
        return response

    def close(self) -> None:
        return


def seed(cache: Path) -> None:
    """Put the context into the validator's cache."""
    package = importlib.util.find_spec("rocrate")
    content = (Path(package.submodule_search_locations[0]) / "data/ro-crate.jsonld").read_bytes()
    if CONTEXT.encode() not in content[:200]:
        raise SystemExit("the package rocrate holds another context than that of RO-Crate 1.1")
    requester = HttpRequester.initialize_cache(cache_max_age=-1, cache_path=str(cache))
    requester.session.mount("https://", Shelf(content))
    # As both readers of the context ask for it.
    for accept in ("application/ld+json, application/json", "application/ld+json"):
        requester.session.get(CONTEXT, headers={"Accept": accept})


def main(crate: Path, cache: Path) -> int:
    """Validate and print; 1 if a required check fails."""
    seed(cache)
    failed = 0
    for profile in PROFILES:
        settings = ValidationSettings(
            rocrate_uri=str(crate),
            profile_identifier=profile,
            requirement_severity=Severity.RECOMMENDED,
            cache_path=str(cache),
            cache_max_age=-1,
            offline=True,
        )
        issues = validate(settings).get_issues()
        required = [issue for issue in issues if issue.severity >= Severity.REQUIRED]
        failed += len(required)
        print(f"{profile}: {len(required)} required and {len(issues) - len(required)} others fail")
        for issue in sorted(issues, key=lambda i: (-i.severity.value, i.check.identifier)):
            print(f"  {issue.severity.name.lower()} {issue.check.identifier}: {issue.message}")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1]), Path(sys.argv[2])))
