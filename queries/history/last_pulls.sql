-- What the newest pull of each source brought.
-- out: source, pulled_at, status, items, rows_*, message
select * exclude (pull_id)
from pulls
qualify row_number() over (partition by source order by pull_id desc) = 1
order by source
