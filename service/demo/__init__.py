"""The main job, shown: an invented co-operative, a day that can be planned, and one that cannot."""
