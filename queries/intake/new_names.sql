-- Gives every characteristic that is met for the first time its number.
insert into characteristics
select (select coalesce(max(characteristic_id), 0) from characteristics) + row_number() over (order by name), name
from (select distinct name from typed where reason is null) as met
where name not in (select name from characteristics)
