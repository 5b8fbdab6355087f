"""One room per stage of the job: records in, records out. Rooms do not know each other."""
