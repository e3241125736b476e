"""A bare ASGI function behind the same server and flags: the baseline of the polls."""

import sys
from pathlib import Path

import uvicorn


def bare(body, headers):
    start = {"type": "http.response.start", "status": 200, "headers": headers}
    end = {"type": "http.response.body", "body": body}

    async def app(_scope, _receive, send):
        await send(start)
        await send(end)

    return app


if __name__ == "__main__":
    port, file = int(sys.argv[1]), Path(sys.argv[2])
    body = file.read_bytes()
    headers = [
        (b"content-type", b"application/json"),
        (b"content-length", str(len(body)).encode()),
    ]
    uvicorn.run(
        bare(body, headers), host="127.0.0.1", port=port, loop="uvloop", http="httptools",
        lifespan="off", access_log=False, server_header=False, log_level="error",
    )  # fmt: skip
