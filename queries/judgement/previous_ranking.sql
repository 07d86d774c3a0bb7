-- The centering list of the newest run that judged an earlier moment: what this week is compared with.
-- in:  $as_of timestamp (UTC)
-- out: characteristic, rank (null for what had left the list then)
select characteristic, rank
from ranking
where run_id = (select max(run_id) from runs where as_of = (select max(as_of) from runs where as_of < $as_of))
order by characteristic
