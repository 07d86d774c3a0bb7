-- Every row that was set aside, newest load first.
-- out: source, item, record_no (line of the file, the header is 1), column_name, reason, raw, rejected_at
select source, item, record_no, column_name, rejected.reason, raw, started_at as rejected_at
from rejected
join loads using (load_id, source, item)
order by load_id desc, record_no, column_name
