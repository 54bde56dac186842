-- name: intake_delimited_rows
-- The lines of a delimited text file, split where that is plain. A place that is NULL gives a NULL field. Only a
-- name or a time that ends the line loses the line end here: trimming every field would cost more than all the rest.
-- Quotes that wrap whole fields without a quote or delimiter inside can just be left out.
select line, rtrim(text, e'\r\n') as text,
  is_utf8 and len(part) = $width
    and (not contains(text, '"') or ($has_quotes and regexp_full_match(text, $simply_quoted))) as is_plain,
  case when not is_utf8 then 'not_utf8' end as fault,
  coalesce($series,
    case when $series_at = $width then rtrim(part[$series_at::int], e'\r\n') else part[$series_at::int] end) as series,
  case when $time_at = $width then rtrim(part[$time_at::int], e'\r\n') else part[$time_at::int] end as time,
  part[$value_at::int] as value, part[$open_at::int] as open, part[$high_at::int] as high,
  part[$low_at::int] as low, part[$volume_at::int] as volume
from (
  select line, text, is_utf8,
    string_split(case when $has_quotes then replace(text, '"', '') else text end, $delimiter) as part
  from intake_line
  where line > $header_line
)

-- name: intake_read_plain
-- Reads what is plain in bulk: rows whose observed_at stays NULL need a careful look. Numbers are cast first and
-- checked after, because the cast also takes 1_000, +-1, inf and 1e400; outer space does not disturb it. A time that
-- has an offset goes through TIMESTAMPTZ, since the cast to TIMESTAMP drops the offset; a local time is moved by its
-- day's offset.
with cast_row as (
  select line, is_plain, series, time,
    case
      when not is_plain or not $reads_plain_times then null
      when regexp_full_match(time,
        '\d{8}|\d{4}-\d\d-\d\d([T ]([01]\d|2[0-3]):[0-5]\d(:[0-5]\d(\.\d+)?)?Z?)?') then 'no offset'
      when regexp_full_match(time,
        '\d{4}-\d\d-\d\d[T ]([01]\d|2[0-3]):[0-5]\d(:[0-5]\d(\.\d+)?)?[+-](0\d|1[0-5])(:?[0-5]\d)?') then 'offset'
    end as form,
    value as value_text, try_cast(value as double) as value,
    open as open_text, try_cast(open as double) as open,
    high as high_text, try_cast(high as double) as high,
    low as low_text, try_cast(low as double) as low,
    volume as volume_text, try_cast(volume as double) as volume
  from (fields)
), checked_row as (
  select line, series, value, open, high, low, volume,
    strlen(time) <= 10 or ends_with(time, 'Z') or form = 'offset' as is_instant,
    case
      when form is null or series = '' or series is null or not intake_is_plain_number(value_text, value)
        or not intake_is_plain_or_empty(open_text, open) or not intake_is_plain_or_empty(high_text, high)
        or not intake_is_plain_or_empty(low_text, low) or not intake_is_plain_or_empty(volume_text, volume) then null
      when form = 'offset' then make_timestamp(epoch_us(try_cast(time as timestamptz)))
      when strlen(time) = 8 then try_cast(time[1:4] || '-' || time[5:6] || '-' || time[7:8] as timestamp)
      else try_cast(time as timestamp)
    end as wall
  from cast_row
)
select r.line, k.series_id,
  case when k.series_id is null then r.series end as name,
  case
    when k.series_id is null and r.series != trim(r.series, $whitespace) then null
    when r.wall not between timestamp '0001-01-01' and timestamp '9999-12-31 23:59:59.999999' then null
    when r.is_instant or coalesce($zone, k.time_zone, 'UTC') = 'UTC' then r.wall
    else r.wall - d.utc_offset
  end as observed_at,
  r.value, r.open, r.high, r.low, r.volume
from checked_row r
left join intake_known k on k.name = r.series
left join intake_plain_day d on d.zone = coalesce($zone, k.time_zone) and d.day = r.wall::date

-- name: intake_number_checks
-- Whether a text that the cast to DOUBLE took is also a plain number by the stricter rule.
create or replace temp macro intake_is_plain_number(said, number) as
  coalesce(isfinite(number) and not contains(said, '_') and not contains(said, '+-'), false)

-- name: intake_empty_checks
-- The same for a field that may be empty or absent; the last of a line still has its end.
create or replace temp macro intake_is_plain_or_empty(said, number) as
  said is null or said in ('', e'\n', e'\r\n') or intake_is_plain_number(said, number)

-- name: intake_table_rows
-- The rows of a table with typed columns, as text; what stands in braces are the table's own columns.
select {line} as line, concat_ws(',', {shown}) as text, true as is_plain, null::varchar as fault,
  coalesce($series, {series}) as series, {time} as time, {value} as value,
  {open} as open, {high} as high, {low} as low, {volume} as volume
from {table}

-- name: intake_late_rows
-- The rows of one intake that were refused because nobody knew their series, for names that are known now.
select line, text, true as is_plain, null::varchar as fault, name as series,
  json_extract_string(fields, '$.time') as time,
  json_extract_string(fields, '$.value') as value,
  json_extract_string(fields, '$.open') as open,
  json_extract_string(fields, '$.high') as high,
  json_extract_string(fields, '$.low') as low,
  json_extract_string(fields, '$.volume') as volume
from base.refused_row
where intake_id = $intake_id and reason = 'unknown_series' and run_to is null and name in (select unnest($names))

-- name: intake_odd_lines
-- The rows that need a careful look, in their order.
select line, text, fault, series, time, value, open, high, low, volume
from (fields)
where line in (select line from intake_row where observed_at is null)
order by line

-- name: intake_odd_table
-- What the careful look gave: an observation, or a reason and, for a name the book may learn, what the row said.
create temp table intake_odd (
  line bigint, series_id integer, name varchar, observed_at timestamp,
  value double, open double, high double, low double, volume double, reason varchar, fields varchar
)

-- name: intake_unknown_names
-- The names that the book does not know, in order of first appearance.
select name
from (
  select name, line from intake_row where observed_at is not null
  union all
  select name, line from intake_odd where series_id is null
)
where name is not null and name not in (select name from intake_known)
group by name
order by min(line)

-- name: intake_refuse_unread
-- The rows that say nothing to settle: unreadable ones and those of unknown or impossible names.
create temp table intake_refusal as
select r.line, u.reason, r.name, null::varchar as fields
from intake_row r
join intake_unknown u on u.name = r.name
where r.observed_at is not null
union all
select o.line, coalesce(u.reason, o.reason), o.name, o.fields
from intake_odd o
left join intake_unknown u on u.name = o.name
where coalesce(u.reason, o.reason) is not null

-- name: intake_to_settle
-- The rows to settle, those of names that became known since they were read among them.
select r.line, coalesce(r.series_id, k.series_id) as series_id, r.observed_at,
  r.value, r.open, r.high, r.low, r.volume
from (
  select *
  from intake_row
  where observed_at is not null
  union all by name
  select line, series_id, name, observed_at, value, open, high, low, volume
  from intake_odd
  where reason is null
) r
left join intake_known k on k.name = r.name
where coalesce(r.series_id, k.series_id) is not null

-- name: intake_keep_refused
-- Keeps the refused rows; those of an unknown series with what they said, so that they can be taken up later.
insert into base.refused_row
select $intake_id, f.line, 0, f.text, r.reason,
  case when r.reason = 'unknown_series' then r.name end,
  case when r.reason = 'unknown_series' then coalesce(r.fields, to_json({
    'time': trim(f.time, $whitespace), 'value': trim(f.value, $whitespace), 'open': trim(f.open, $whitespace),
    'high': trim(f.high, $whitespace), 'low': trim(f.low, $whitespace), 'volume': trim(f.volume, $whitespace)
  })::varchar) end,
  $run_id, null
from (fields) f
join intake_refusal r on r.line = f.line
order by f.line
