-- What the staging table holds: read, set aside, not measured, in the doubled hour, unregistered; first and last time.
select
    count(*) as rows_read,
    count(*) filter (where reason is not null and reason <> 'not measured') as rows_rejected,
    count(*) filter (where reason = 'not measured') as rows_empty,
    count(*) filter (where reason is null and doubled_hour) as rows_doubled_hour,
    count(*) filter (where reason is null and registered.name is null) as rows_unregistered,
    min(taken_at) filter (where reason is null) as first_taken,
    max(taken_at) filter (where reason is null) as last_taken
from typed
left join registered using (name)
