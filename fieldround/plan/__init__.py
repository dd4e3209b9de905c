"""Before the work: proposals for a round's sheets."""
