-- The rows of one judgement.
-- in:  $run_id integer
select * exclude (run_id) from results where run_id = $run_id order by characteristic
