-- How the batch met the store.
select
    (select count(*) from batch) as rows_good,
    (select count(*) from met where new_value is not distinct from old_value) as rows_known,
    (select count(*) from met where new_value is distinct from old_value) as rows_corrected
