"""``rigbench audit``: whether the engine plays the arm that its file declares, and at which step."""

from __future__ import annotations

from pathlib import Path

from rigbench.arm.files import ArmFiles
from rigbench.cli.output import print_json, say, show, tell_notes, width

__all__ = ["audit_arm"]


def audit_arm(path: str, output: str | None, as_json: bool) -> None:
    """Print the audit of an arm; draw it too where ``output`` names a picture."""
    files = ArmFiles.read(path)
    arm = files.arm()
    if output is not None:
        from rigbench.report.audit_picture import audit_picture
        from rigbench.report.picture import check_format

        check_format(Path(output))
    from rigbench.campaign.audit import audit
    from rigbench.report.audit_text import audit_text
    from rigbench.rig import warm_up

    tell_notes(arm.notes)
    say(f"auditing {arm.name}, which takes some ten seconds")
    warm_up()
    found = audit(files)
    if output is not None:
        audit_picture(found, Path(output))
    if as_json:
        print_json(found.document() | {"picture": output})
    else:
        show(audit_text(found, width()))
        if output is not None:
            say(f"picture: {output}")
