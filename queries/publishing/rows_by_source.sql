-- What each source has brought over all time.
-- out: source, items, rows_read, rows_new, rows_known, rows_corrected, rows_rejected, rows_empty, last_taken
select
    source,
    count(*) filter (where status = 'done') as items,
    sum(rows_read) as rows_read,
    sum(rows_new) as rows_new,
    sum(rows_known) as rows_known,
    sum(rows_corrected) as rows_corrected,
    sum(rows_rejected) as rows_rejected,
    sum(rows_empty) as rows_empty,
    max(last_taken) as last_taken
from loads
group by source
order by source
