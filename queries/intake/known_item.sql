-- The newest ledger entry of an item that is exactly as it was (name, size, time of change).
-- in: $source, $item, $size, $modified
select status, reason
from loads
where source = $source and item = $item and size = $size and modified = $modified
order by load_id desc
limit 1
