-- One characteristic in one judgement.
-- in:  $run_id integer, $characteristic varchar
select * exclude (run_id) from results where run_id = $run_id and characteristic = $characteristic
