"""How the app is served: on this computer only, nothing sent anywhere.

The options travel on the command line, so that they hold from an installed package
as they do from a checkout.
"""

from __future__ import annotations

import os
import sys
from pathlib import Path

from reviewapp.drawings.svg import DARK, LIGHT, Colours

LOG_VARIABLE = "AEROSOL_REVIEW_LOG"
APP = Path(__file__).with_name("app.py")

_OPTIONS = {
    "server.address": "127.0.0.1",
    "server.fileWatcherType": "none",
    "server.maxUploadSize": "50",
    "browser.gatherUsageStats": "false",
    "client.toolbarMode": "viewer",
    "client.showErrorDetails": "none",
    "runner.magicEnabled": "false",
}

_HOSTS = ("localhost", "127.0.0.1")


def streamlit_command(port: int | None = None) -> list[str]:
    """The command that serves the app."""
    options = dict(_OPTIONS)
    for mode, colours in (("light", LIGHT), ("dark", DARK)):
        options |= {f"theme.{mode}.{k}": v for k, v in _theme(colours).items()}
    if port is not None:
        options |= {"server.port": str(port), "server.headless": "true"}
    listed = [f"--{name}={value}" for name, value in options.items()]
    # An option that is a list is given once for each of its values.
    listed += [f"--server.allowedHosts={host}" for host in _HOSTS]
    return [sys.executable, "-m", "streamlit", "run", str(APP), *listed]


def streamlit_environment(log: Path | None) -> dict[str, str]:
    """The environment the app is served in; names the log to open first."""
    environment = {**os.environ, "STREAMLIT_BROWSER_GATHER_USAGE_STATS": "false"}
    environment.pop(LOG_VARIABLE, None)
    if log is not None:
        environment[LOG_VARIABLE] = str(Path(log).resolve())
    return environment


def _theme(colours: Colours) -> dict[str, str]:
    return {
        "primaryColor": colours["aerosol"],
        "backgroundColor": colours["paper"],
        "secondaryBackgroundColor": colours["panel"],
        "textColor": colours["ink"],
        "borderColor": colours["lost"],
    }
