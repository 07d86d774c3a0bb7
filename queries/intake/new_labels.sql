-- Gives every subgroup, stream, lot and unit text that is met for the first time its number.
insert into labels
select (select coalesce(max(label_id), 0) from labels) + row_number() over (order by label), label
from (
    select distinct unnest([subgroup, stream, lot, unit]) as label from typed where reason is null
) as met
where label is not null and label not in (select label from labels)
