"""From a window to findings: triage, choice of methods, execution, verdicts."""
