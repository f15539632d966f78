"""The independent reference solver: nodal equations in Kirchhoff variables, own laws and stamps, own integrator."""
