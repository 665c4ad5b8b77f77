"""From unknown parameters to parameters known so well.

``regressor`` writes the joint torques as a matrix times the parameters, ``base`` says which combinations of
them joint torques can tell at all. ``excitation`` makes a motion that shows them, ``logs`` reads what was
recorded along it, ``filtering`` prepares it, ``estimate`` finds the base parameters with their
covariance, and ``consistent`` whole parameters of bodies that can exist.
"""
