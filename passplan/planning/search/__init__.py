"""Plans at fleet size: schedules of single spacecraft found exactly, put together by search and by prices."""
