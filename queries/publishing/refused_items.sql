-- Files that were refused whole and have not been replaced by a good delivery of the same name.
-- out: source, item, reason, at
select source, item, reason, started_at as at
from loads
qualify row_number() over (partition by source, item order by load_id desc) = 1 and status = 'refused'
order by source, item
