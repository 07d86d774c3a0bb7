-- Records that broke the form of a row, one a record.
-- out: line (the header is line 1 after what was skipped), column_name, reason, raw
select
    line,
    any_value(column_name) as column_name,
    any_value(case error_type
        when 'TOO MANY COLUMNS' then 'too many columns'
        when 'MISSING COLUMNS' then 'missing columns'
        when 'LINE SIZE OVER MAXIMUM' then 'line too long'
        when 'INVALID ENCODING' then 'encoding'
        else lower(error_type)
    end) as reason,
    any_value(csv_line) as raw
from reject_errors
group by line
order by line
