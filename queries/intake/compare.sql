-- Which rows of the batch the store knows already, and with which value.
-- in: $first, $last timestamp: only this time can hold equal keys
create or replace temp table met as
select b.characteristic_id, b.taken_at, b.unit_no, b.value as new_value, m.value as old_value, m.load_id as old_load_id
from batch as b
join (
    select characteristic_id, taken_at, unit_no, value, load_id
    from measurements
    where taken_at between $first and $last
) as m using (characteristic_id, taken_at, unit_no)
