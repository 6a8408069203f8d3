"""What if: studies of many related problems, each point certified."""
