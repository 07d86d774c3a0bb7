-- The last logged change of each characteristic before a moment: the start of the stretch that is judged.
-- in:  $as_of timestamp (UTC)
-- out: characteristic, changed_at (microseconds)
select characteristic, epoch_us(max(changed_at)) as changed_at
from changes
where changed_at < $as_of
group by characteristic
order by characteristic
