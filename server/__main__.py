"""`python -m server`: start uvicorn, nothing else."""

import argparse
from collections.abc import Sequence

import uvicorn


def main(argv: Sequence[str] | None = None) -> None:
    """Serve the pages and the API until interrupted; also the console command."""
    options = argparse.ArgumentParser(prog="duskvalve", description="Serve Duskvalve's pages and API on this computer.")
    options.add_argument("--host", default="127.0.0.1", help="address to listen on; the default is this computer only")
    options.add_argument("--port", type=int, default=8000, help="port to listen on")
    given = options.parse_args(argv)
    host = f"[{given.host}]" if ":" in given.host else given.host
    print(f"Duskvalve listens at http://{host}:{given.port}/  (Ctrl-C stops it)", flush=True)
    uvicorn.run(
        "server.web.app:create_app",
        factory=True,
        host=given.host,
        port=given.port,
        log_level="warning",
        server_header=False,
        limit_concurrency=400,  # an outer fuse only: the queue in work.py turns work away long before
    )


if __name__ == "__main__":
    main()
