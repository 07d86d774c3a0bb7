-- Notes every value that this item changes: the old one is never lost.
-- in: $load_id, $now timestamp (UTC)
insert into corrections
select $load_id, characteristic_id, taken_at, unit_no, old_value, new_value, old_load_id, $now
from met
where new_value is distinct from old_value
