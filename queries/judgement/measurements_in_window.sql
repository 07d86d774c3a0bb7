-- Values of some characteristics in a time window, in chart order.
-- in:  $characteristics integer[], $since timestamp, $until timestamp (UTC, half open)
-- out: characteristic_id, taken_at (microseconds), subgroup and stream (label_id, -1 where there is none), value
-- why sorted: statistics cut the flat arrays by characteristic without another sort; the last keys only settle ties
select
    characteristic_id,
    epoch_us(taken_at) as taken_at,
    coalesce(subgroup_no, -1) as subgroup,
    coalesce(stream_no, -1) as stream,
    value
from measurements
where characteristic_id in (select unnest($characteristics))
    and taken_at >= $since and taken_at < $until
order by characteristic_id, taken_at, subgroup, stream, unit_no
