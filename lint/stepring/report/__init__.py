"""Last stage: verdicts become a SARIF log and a printed report."""
