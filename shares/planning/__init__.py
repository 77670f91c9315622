"""Looking at a policy before anything is split: who makes a quorum, and who can block one. Public data only."""
