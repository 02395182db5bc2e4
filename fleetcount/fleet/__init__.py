"""Who counts: the coordinator, the work done on a machine, the local fleet."""
