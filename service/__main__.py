"""Start the service: `python3 -m service`. Where it listens and what it allows comes from the environment.

`--help` lists the settings.
"""

from __future__ import annotations

import argparse
import sys
from typing import TYPE_CHECKING

from service.first_run import prepare

if TYPE_CHECKING:
    from service.settings import Settings


def main() -> None:
    """Install what is missing in a fresh checkout, then serve until told to stop."""
    prepare("service")

    # Only now are the packages that these need certain to be installed.
    import uvicorn

    from service.app import create_app

    settings = read_settings()
    uvicorn.run(
        create_app(settings),
        host=settings.host,
        port=settings.port,
        # A browser that follows a long computation never closes its connection by itself.
        timeout_graceful_shutdown=10,
        limit_concurrency=settings.limit_concurrency,
        server_header=False,
    )


def read_settings() -> Settings:
    """Settings from the environment; one sentence for each that is wrong, and exit code 2, if any is."""
    from pydantic import ValidationError
    from pydantic_settings import SettingsError

    from service.settings import Settings

    parser = argparse.ArgumentParser(
        prog="python3 -m service",
        description="Start the service. These environment variables change what it does:",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        epilog="\n".join(
            f"  {variable(name)}={field.get_default(call_default_factory=True)}\n      {field.description}"
            for name, field in Settings.model_fields.items()
        ),
    )
    parser.parse_args()
    try:
        return Settings()
    except ValidationError as error:
        for mistake in error.errors():
            print(f"{variable(*mistake['loc'])}: {mistake['msg']}.", file=sys.stderr)
    except SettingsError as error:
        print(f'{error}; a list has to be given as JSON, such as ["one", "two"].', file=sys.stderr)
    raise SystemExit(2)


def variable(*path: str | int) -> str:
    """The environment variable of a setting, with the place in its list if that is meant."""
    return "STILLFIELD_" + ".".join(str(part) for part in path).upper()


if __name__ == "__main__":
    main()
