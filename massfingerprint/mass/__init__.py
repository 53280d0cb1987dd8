"""What was lost, by whom, when, how surely: the mass ledger and its uncertainty."""
