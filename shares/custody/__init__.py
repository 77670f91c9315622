"""What is done with shares: split, hand over, verify, recover. Knows custodians and files, not terminals."""
