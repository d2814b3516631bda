"""JSON as it leaves: no NaN, no character that cannot be sent."""

import json

from pydantic import BaseModel
from starlette.responses import JSONResponse, Response

from server.web.refusals import PROBLEM_TYPE


class ProblemResponse(JSONResponse):
    """An error as RFC 9457 has it."""

    media_type = PROBLEM_TYPE

    def render(self, content: object) -> bytes:
        """Readable UTF-8; half characters, should one come this far, stay escaped."""
        text = json.dumps(content, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
        return text.encode("utf-8", "backslashreplace")


def record(content: BaseModel) -> Response:
    """A pydantic record as JSON; NaN and infinity become null."""
    return Response(content.model_dump_json(by_alias=True), media_type="application/json")
