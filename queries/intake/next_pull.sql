-- The number of this pull.
select coalesce(max(pull_id), 0) + 1 from pulls
