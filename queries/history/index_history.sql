-- The judged index of every characteristic in every judgement up to one run, one judgement a moment (the newest wins).
-- in:  $run_id integer
-- out: characteristic, as_of, index, index_low, index_high, cell, target_cpk
select characteristic, as_of, "index", index_low, index_high, cell, target_cpk
from results
join runs using (run_id)
where run_id <= $run_id
qualify row_number() over (partition by characteristic, as_of order by run_id desc) = 1
order by characteristic, as_of
