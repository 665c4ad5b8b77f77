"""What stands around tray6: a table, and a tray that lies loose in the rails of its gripper. SI units.

A scene is a function of the engine's client, the arm's body in it, and the arm. It adds bodies with
pybullet's own calls; from then on they touch the arm wherever its URDF has collision shapes.
"""

import pybullet

from rigbench.rig import tool_pose

TRAY_KG = 1.5
TRAY_FRICTION = 0.4  # times that of what it lies on: the engine multiplies the two


def table_and_tray(client, body, arm):
    """The table that trays are loaded from, and a tray in the gripper, where the arm starts."""
    table(client)
    tray(client, *tool_pose(client, body, arm))


def table(client):
    """A table top of 0.5 x 0.5 m, 50 mm above the floor that the arm stands on."""
    top = pybullet.createCollisionShape(
        pybullet.GEOM_BOX, halfExtents=[0.25, 0.25, 0.025], physicsClientId=client
    )
    return pybullet.createMultiBody(0, top, basePosition=[0.22, 0.62, 0.025], physicsClientId=client)


def tray(client, position, orientation, mass=TRAY_KG):
    """A tray with its centre of gravity at ``position``: a tub, and a rim that lies on the rails' ledges."""
    shape = pybullet.createCollisionShapeArray(
        [pybullet.GEOM_BOX, pybullet.GEOM_BOX],
        halfExtents=[[0.115, 0.112, 0.02], [0.12, 0.131, 0.005]],
        collisionFramePositions=[[0, 0, -0.01], [0, 0, 0.015]],
        physicsClientId=client,
    )
    found = pybullet.createMultiBody(
        mass, shape, basePosition=position, baseOrientation=orientation, physicsClientId=client
    )
    pybullet.changeDynamics(
        found, -1, lateralFriction=TRAY_FRICTION, linearDamping=0, angularDamping=0, physicsClientId=client
    )
    return found
