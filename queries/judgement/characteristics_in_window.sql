-- How many values each characteristic has in a time window: the plan of the shards.
-- in:  $since timestamp, $until timestamp (UTC, half open)
-- out: characteristic_id, name, measurements (0 where the store knows the name but the window is empty)
select characteristic_id, name, coalesce(m.measurements, 0) as measurements
from characteristics
left join (
    select characteristic_id, count(*) as measurements
    from measurements
    where taken_at >= $since and taken_at < $until
    group by all
) as m using (characteristic_id)
order by characteristic_id
