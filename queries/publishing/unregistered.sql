-- Characteristics with measurements that the judged registry does not know.
-- in:  $run_id integer
-- out: name, measurements
select name, count(*) as measurements
from measurements
join characteristics using (characteristic_id)
where name not in (select characteristic from results where run_id = $run_id)
group by name
order by measurements desc, name
limit 200
