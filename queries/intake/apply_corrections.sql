-- Puts the corrected values in their place.
-- in: $load_id
update measurements as m
set value = met.new_value, load_id = $load_id
from met
where m.characteristic_id = met.characteristic_id
    and m.taken_at = met.taken_at
    and m.unit_no = met.unit_no
    and met.new_value is distinct from met.old_value
