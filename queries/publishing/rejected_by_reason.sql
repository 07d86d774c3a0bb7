-- Rows set aside, counted by source and reason.
-- out: source, reason, rows, items, example (item and line of the newest one)
select
    source,
    reason,
    count(*) as rows,
    count(distinct item) as items,
    arg_max(item || coalesce(', line ' || record_no, ''), load_id) as example
from rejected
group by source, reason
order by source, rows desc, reason
