"""What the department has decided: placement table, limits, hours, cell sizes."""

from engine.policy.model import Policy, load_policy, policy_from

__all__ = ["Policy", "load_policy", "policy_from"]
