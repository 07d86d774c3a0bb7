-- What the pages of one judgement draw.
-- in:  $run_id integer
select * exclude (run_id) from evidence where run_id = $run_id order by characteristic
