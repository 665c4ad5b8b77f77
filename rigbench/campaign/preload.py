"""Imported by the server process of the workers as it starts, for what that import does; empty elsewhere."""

from __future__ import annotations

import sys

from rigbench.campaign.worker import prepare_server

if any("multiprocessing.forkserver" in argument for argument in sys.orig_argv):
    prepare_server()
