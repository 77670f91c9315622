"""Looking at a policy before anything is split: who makes a quorum, who blocks one, and the odds. Public data only."""
