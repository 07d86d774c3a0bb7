-- The temporary tables of an intake: what is registered, for the check of units.
-- (Filled by the program; dropped with the connection.)
create or replace temp table registered (name varchar, unit varchar)
