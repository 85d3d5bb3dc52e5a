"""The workbench in a process of its own, and a page's conversation with it, spoken over HTTP without a browser."""

from __future__ import annotations

import http.client
import json
import uuid
from collections.abc import Mapping
from http.cookies import SimpleCookie
from typing import Any
from urllib.parse import quote, urlsplit

from core import archive
from core.workspace import Workspace

Event = dict[str, Any]


class Visitor:
    """One tab: let in by a link, then asking as the page's scripts ask."""

    def __init__(self, link: str):
        address = urlsplit(link)
        self.host = address.netloc
        self.cookies: dict[str, str] = {}
        self._connection = http.client.HTTPConnection(self.host, timeout=60)
        status, _ = self.ask("GET", f"{address.path}?{address.query}")
        assert status == 200
        assert self.ask("GET", "/")[0] == 200
        self.token = next(value for name, value in self.cookies.items() if name.startswith("sweepbench_token"))
        wires = json.loads(self.ask("GET", "/_dash-dependencies")[1])
        self._wires = [wire for wire in wires if not wire["clientside_function"] and wire["output"]]

    def close(self) -> None:
        self._connection.close()

    def ask(self, method: str, path: str, body: bytes | None = None, **headers: str) -> tuple[int, bytes]:
        """Status and body of one request. Raises what http.client raises where the server is gone."""
        given = {"Cookie": "; ".join(f"{name}={value}" for name, value in self.cookies.items())}
        if method != "GET":
            given |= {"X-CSRFToken": self.token, "Origin": f"http://{self.host}", "Sec-Fetch-Site": "same-origin"}
        given |= {name.replace("_", "-"): value for name, value in headers.items()}
        try:
            self._connection.request(method, path, body, given)
            answer = self._connection.getresponse()
            content = answer.read()
        except (OSError, http.client.HTTPException):
            self._connection.close()  # the next request begins anew
            raise
        for value in answer.headers.get_all("Set-Cookie", []):
            self.cookies |= {name: morsel.value for name, morsel in SimpleCookie(value).items()}
        return answer.status, content

    def post(self, path: str, values: Any) -> tuple[int, Any]:
        status, content = self.ask("POST", path, json.dumps(values).encode(), Content_Type="application/json")
        return status, json.loads(content) if content else None

    def drop(self, workspace: str, files: Mapping[str, bytes]) -> dict[str, Any]:
        """Drop files on the page."""
        edge = uuid.uuid4().hex
        parts = [
            f'--{edge}\r\nContent-Disposition: form-data; name="files"; filename="{quote(name)}"\r\n\r\n'.encode() + data
            for name, data in files.items()
        ]
        body = b"\r\n".join([*parts, f"--{edge}--\r\n".encode()])
        content_type = f"multipart/form-data; boundary={edge}"
        status, content = self.ask("POST", f"/files/{workspace}", body, Content_Type=content_type)
        assert status == 200, content
        return json.loads(content)

    def call(self, trigger: str, values: Mapping[str, Any]) -> Any:
        """Run the callback that ``component.property`` sets off; None where it gives nothing back."""
        (wire,) = [w for w in self._wires if trigger in [f"{given['id']}.{given['property']}" for given in w["inputs"]]]
        return self._run(wire, trigger, values)

    def show(self, store: str, values: Mapping[str, Any]) -> Any:
        """Run the callback that fills this store of the page when the revision moves on."""
        (wire,) = [w for w in self._wires if f"{store}.data" in _outputs(w)]
        return self._run(wire, "revision.data", values)

    def _run(self, wire: dict[str, Any], trigger: str, values: Mapping[str, Any]) -> Any:
        outputs = [dict(zip(("id", "property"), name.rsplit(".", 1), strict=True)) for name in _outputs(wire)]

        def filled(given: list[dict[str, str]]) -> list[dict[str, Any]]:
            return [{**one, "value": values.get(f"{one['id']}.{one['property']}")} for one in given]

        status, answer = self.post(
            "/_dash-update-component",
            {
                "output": wire["output"],
                "outputs": outputs if wire["output"].startswith("..") else outputs[0],
                "inputs": filled(wire["inputs"]),
                "state": filled(wire.get("state", [])),
                "changedPropIds": [trigger],
            },
        )
        if status == 204:
            return None
        assert status == 200, (status, answer)
        return answer

    def hand(self, event: Event) -> dict[str, Any]:
        """Send an event of the hand as the outbox does; the revision that answers it."""
        return self.call("hand.data", {"hand.data": {"event": uuid.uuid4().hex, "tries": 1, **event}})["response"]["revision"]["data"]

    def travel(self, kind: str, workspace: str, revision: int) -> dict[str, Any]:
        """Undo or redo, as the outbox asks for it."""
        return self.hand({"kind": kind, "workspace": workspace, "revision": revision})

    def new_workspace(self, here: str, name: str) -> str:
        values = {"errand.data": {"kind": "new", "name": name}, "revision.data": {"workspace": here, "revision": 0}}
        return self.call("errand.data", values)["response"]["revision"]["data"]["workspace"]

    def first(self) -> str:
        """Id of the workspace that a fresh page opens."""
        layout = json.loads(self.ask("GET", "/_dash-layout")[1])
        stores = {part["props"].get("id"): part["props"] for part in layout["props"]["children"]}
        return stores["revision"]["data"]["workspace"]

    def kept(self, workspace: str) -> Workspace:
        """The workspace as it is handed out for keeping, at the revision that stands."""
        status, content = self.ask("GET", f"/files/export/{workspace}")
        assert status == 200, content
        found = archive.unpack(content).workspace
        revision = json.loads(self.ask("GET", f"/live/{workspace}")[1])["revision"]
        return Workspace(workspace, found.name, revision, found.devices, found.entries, found.fits, found.statements)


def _outputs(wire: Mapping[str, Any]) -> list[str]:
    return wire["output"].strip(".").split("...")
