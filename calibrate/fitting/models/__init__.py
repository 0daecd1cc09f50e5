"""One likelihood per family, or per two families that share one."""
