-- The number of the next load.
select coalesce(max(load_id), 0) + 1 from loads
