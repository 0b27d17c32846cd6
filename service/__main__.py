"""Start the service: `python3 -m service`. Where it listens and what it allows comes from the environment."""

from __future__ import annotations

import sys

from service.first_run import prepare


def main() -> None:
    """Install what is missing in a fresh checkout, then serve until told to stop."""
    prepare("service")

    # Only now are these certain to be installed.
    import uvicorn
    from pydantic import ValidationError

    from service.app import create_app
    from service.settings import Settings

    try:
        settings = Settings()
    except ValidationError as error:
        for mistake in error.errors():
            name = "_".join(["STILLFIELD", *(str(part).upper() for part in mistake["loc"])])
            print(f"{name}: {mistake['msg']}.", file=sys.stderr)
        raise SystemExit(2) from None

    uvicorn.run(
        create_app(settings),
        host=settings.host,
        port=settings.port,
        # A browser that follows a long computation never closes its connection by itself.
        timeout_graceful_shutdown=10,
        limit_concurrency=settings.limit_concurrency,
        server_header=False,
    )


if __name__ == "__main__":
    main()
