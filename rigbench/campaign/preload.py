"""Imported by the server process of the workers as it starts, for what that import does; empty elsewhere."""

from __future__ import annotations

import os

from rigbench.campaign.worker import prepare_server

__all__ = ["SERVER_OF"]

SERVER_OF = "RIGBENCH_SERVER_OF"
"""Environment variable that holds the id of the process that starts a server."""

if os.environ.get(SERVER_OF) == str(os.getppid()):
    prepare_server()
