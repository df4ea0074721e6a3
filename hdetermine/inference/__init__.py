"""From counts to cutoffs, from cutoffs to h."""
