-- The centering list of one judgement, and what had left it.
-- in:  $run_id integer
select rank, characteristic, status, reason from ranking where run_id = $run_id order by rank nulls last, characteristic
