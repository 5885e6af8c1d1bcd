"""The main job, shown: an invented co-operative, a day that can be planned, one that cannot, and its cure."""
