-- Every judgement, oldest first.
select * from runs order by run_id
