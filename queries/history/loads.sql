-- The ledger: every item that was taken in or refused, newest first.
select * from loads order by load_id desc
