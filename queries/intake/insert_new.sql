-- Appends what is new, in the order in which it will be read.
-- in: $load_id
insert into measurements
    (characteristic_id, taken_at, unit_no, value, subgroup_no, stream_no, lot_no, unit_label, disposition, load_id)
select
    characteristic_id, taken_at, unit_no, value, subgroup_no, stream_no, lot_no, unit_label, disposition, $load_id
from batch
anti join met using (characteristic_id, taken_at, unit_no)
order by characteristic_id, taken_at
