-- name: intake_row_key
-- Line and cell of a row in one number; rows arrive in its order.
create or replace temp macro intake_row_key(line, cell) as line * 1048576 + cell

-- name: intake_delimited_lines
-- The lines of a delimited text file, split where that is plain. Quotes that wrap whole fields without a quote or
-- delimiter inside can just be left out. A blank line is no row: mostly one that is not plain and says so when looked
-- at, but a line of tabs alone could pass for one.
select line, rtrim(text, e'\r\n') as text,
  is_utf8 and len(part) = $width
    and (not contains(text, '"') or ($has_quotes and regexp_full_match(text, $simply_quoted))) as is_plain,
  case
    when not is_utf8 then 'not_utf8'
    when len(part) != $width and not contains(text, '"') and trim(text, $whitespace) != '' then 'wrong_field_count'
  end as fault,
  part
from (
  select line, text, is_utf8,
    string_split(case when $has_quotes then replace(text, '"', '') else text end, $delimiter) as part
  from intake_line
  where line > $header_line and text not in (e'\n', e'\r\n', e'\r')
    and ($delimiter != e'\t' or trim(text, $whitespace) != '')
)

-- name: intake_json_lines
-- The lines of a file of JSON objects; only one that has each key once says plainly what it means.
select line, rtrim(text, e'\r\n') as text, is_object as is_plain,
  case when not is_utf8 then 'not_utf8' when not is_object then 'bad_json' end as fault,
  case when is_object then text end as object
from (
  select line, text, is_utf8, coalesce(is_utf8 and len(keys) = len(list_distinct(keys)), false) as is_object, keys
  from (
    select line, text, is_utf8,
      case when json_valid(text) and ltrim(text, $whitespace)[1] = '{' then json_keys(text) end as keys
    from intake_line
    where trim(text, $whitespace) != ''
  )
)

-- name: intake_json_keys
-- The keys of all objects, in order of first appearance.
select key
from (
  select line, unnest(json_keys(object)) as key, unnest(range(len(json_keys(object)))) as position
  from (lines)
  where is_plain
)
group by key
order by min((line, position))

-- name: intake_json_number
-- A value of JSON with a decimal comma: a number by its type gets one, a string has to have it.
create or replace temp macro intake_json_number(found) as
  case
    when json_type(found) = 'VARCHAR' then found ->> '$'
    else replace(found ->> '$', '.', ',')
  end

-- name: intake_table_lines
-- The rows of a table with typed columns; what stands in braces are the table's own columns.
select {line} as line, concat_ws(',', {shown}) as text, true as is_plain, null::varchar as fault, {columns}
from {table}

-- name: intake_long_rows
-- Each line is a row; what stands in braces are the texts of its fields.
select intake_row_key(line, 0) as row_key, text, is_plain, fault,
  coalesce($series, {series}) as series, {time} as time, {value} as value,
  {open} as open, {high} as high, {low} as low, {volume} as volume
from ({lines})

-- name: intake_wide_rows
-- Each cell beside the time that is not empty is a row. A line that needs a careful look gives all its cells and one
-- more, cell 0, that stands for the whole line; one that is refused unread gives only that.
select intake_row_key(line, cell) as row_key, text, is_plain, fault,
  ($names::varchar[])[cell] as series, time, {value} as value,
  null::varchar as open, null::varchar as high, null::varchar as low, null::varchar as volume
from (
  select line, text, is_plain, fault, {time} as time,
    unnest(case when is_plain then {numbers} else list_resize([]::varchar[], $columns + 1) end) as number,
    unnest(case when is_plain then range(1, $columns + 1) else range(0, $columns + 1) end) as cell
  from ({lines})
)
where case
    when fault is not null then cell = 0
    when not is_plain then true
    else cell != $time_cell and trim(coalesce({value}, ''), $whitespace) != ''
  end

-- name: intake_read_plain
-- Reads what is plain in bulk: rows whose observed_at stays NULL need a careful look. Numbers are cast first and
-- checked after, because the cast also takes 1_000, +-1, inf and 1e400; outer space does not disturb it. A time that
-- has an offset goes through TIMESTAMPTZ, since the cast to TIMESTAMP drops the offset; a local time is moved by its
-- day's offset.
with cast_row as (
  select row_key, is_plain, series, time,
    case
      when not is_plain then null
      when $told_form is not null then 'told'
      when not $reads_plain_times then null
      when regexp_full_match(time,
        '\d{8}|\d{4}-\d\d-\d\d([T ]([01]\d|2[0-3]):[0-5]\d(:[0-5]\d(\.\d+)?)?Z?)?') then 'no offset'
      when regexp_full_match(time,
        '\d{4}-\d\d-\d\d[T ]([01]\d|2[0-3]):[0-5]\d(:[0-5]\d(\.\d+)?)?[+-](0\d|1[0-5])(:?[0-5]\d)?') then 'offset'
      when regexp_full_match(time, '\d{4}/\d\d?/\d\d?( \d\d?:\d\d(:\d\d)?)?') then 'year first'
      when $day_and_month is null then null
      when regexp_full_match(time,
        '(\d\d?/\d\d?/|\d\d?\.\d\d?\.|\d\d?-\d\d?-)\d{4}( \d\d?:\d\d(:\d\d)?)?') then 'year last'
      when regexp_full_match(time,
        '(\d\d?/\d\d?/|\d\d?\.\d\d?\.|\d\d?-\d\d?-)\d\d( \d\d?:\d\d(:\d\d)?)?') then 'short year last'
    end as form,
    value as value_text, intake_number(value) as value,
    open as open_text, intake_number(open) as open,
    high as high_text, intake_number(high) as high,
    low as low_text, intake_number(low) as low,
    volume as volume_text, intake_number(volume) as volume
  from (fields)
), checked_row as (
  select row_key, series, value, open, high, low, volume,
    case form
      when 'offset' then true
      when 'told' then not $told_form_has_clock
      else not contains(time, ':') or ends_with(time, 'Z')
    end as is_instant,
    case
      when form is null or series = '' or series is null or not intake_is_plain_or_empty(value_text, value)
        or not intake_is_plain_or_empty(open_text, open) or not intake_is_plain_or_empty(high_text, high)
        or not intake_is_plain_or_empty(low_text, low) or not intake_is_plain_or_empty(volume_text, volume) then null
      when form = 'told' then intake_told_time(time, $told_form, $told_form_unpadded)
      when form = 'offset' then make_timestamp(epoch_us(try_cast(time as timestamptz)))
      when form = 'year first' then try_strptime(intake_with_clock(time), '%Y/%m/%d %H:%M:%S')
      when form = 'year last' then try_strptime(intake_with_clock(time), $day_and_month || '/%Y %H:%M:%S')
      when form = 'short year last' then try_strptime(intake_with_clock(time), $day_and_month || '/%y %H:%M:%S')
      when strlen(time) = 8 then try_cast(time[1:4] || '-' || time[5:6] || '-' || time[7:8] as timestamp)
      else try_cast(time as timestamp)
    end as wall
  from cast_row
)
select r.row_key, k.series_id,
  case when k.series_id is null then r.series end as name,
  case
    when k.series_id is null and r.series != trim(r.series, $whitespace) then null
    when r.wall not between timestamp '0001-01-01' and timestamp '9999-12-31 23:59:59.999999' then null
    when r.is_instant or coalesce($zone, k.time_zone, 'UTC') = 'UTC' then r.wall
    else r.wall - d.utc_offset
  end as observed_at,
  r.value,
  case when r.value is not null then r.open end as open, case when r.value is not null then r.high end as high,
  case when r.value is not null then r.low end as low, case when r.value is not null then r.volume end as volume
from checked_row r
left join intake_known k on k.name = r.series
left join intake_plain_day d on d.zone = coalesce($zone, k.time_zone) and d.day = r.wall::date

-- name: intake_point_numbers
-- Numbers with a decimal point.
create or replace temp macro intake_number(said) as try_cast(said as double)

-- name: intake_comma_numbers
-- Numbers with a decimal comma; one with a point is none.
create or replace temp macro intake_number(said) as
  case when not contains(said, '.') then try_cast(replace(said, ',', '.') as double) end

-- name: intake_with_clock
-- A date with slashes, dots or dashes and perhaps a clock: with slashes and the clock to the second.
create or replace temp macro intake_with_clock(said) as
  translate(said, '.-', '//') || case
    when not contains(said, ':') then ' 00:00:00'
    when regexp_matches(said, ':\d\d:') then ''
    else ':00'
  end

-- name: intake_told_time
-- A time in the form that is told, if it reads and would be written just so; anything less strict is not plain.
create or replace temp macro intake_told_time(said, form, unpadded) as
  case
    when strftime(try_strptime(said, form), form) = said then try_strptime(said, form)
    when strftime(try_strptime(said, form), unpadded) = said then try_strptime(said, form)
  end

-- name: intake_number_checks
-- Whether a text that the cast to DOUBLE took is also a plain number by the stricter rule.
create or replace temp macro intake_is_plain_number(said, number) as
  coalesce(isfinite(number) and not contains(said, '_') and not contains(said, '+-'), false)

-- name: intake_empty_checks
-- The same for a field that may be empty or absent; the last of a line still has its end.
create or replace temp macro intake_is_plain_or_empty(said, number) as
  said is null or said in ('', e'\n', e'\r\n', e'\r') or intake_is_plain_number(said, number)

-- name: intake_late_rows
-- The rows of one intake that were refused because nobody knew their series, for names that are known now.
select intake_row_key(line, cell) as row_key, text, true as is_plain, null::varchar as fault, name as series,
  json_extract_string(fields, '$.time') as time,
  json_extract_string(fields, '$.value') as value,
  json_extract_string(fields, '$.open') as open,
  json_extract_string(fields, '$.high') as high,
  json_extract_string(fields, '$.low') as low,
  json_extract_string(fields, '$.volume') as volume
from base.refused_row
where intake_id = $intake_id and reason = 'unknown_series' and run_to is null and name in (select unnest($names))

-- name: intake_odd_rows
-- The rows that need a careful look, in their order. The cells of a line share its text, so only the first, cell 0,
-- brings it along.
select row_key, row_key % 1048576 as cell, case when row_key % 1048576 = 0 then text end as text, is_plain, fault, series, time, value, open, high, low, volume
from (fields)
where row_key in (select row_key from intake_row where observed_at is null)
order by row_key

-- name: intake_odd_table
-- What the careful look gave: an observation, or a reason and, for a name the book may learn, what the row said.
create temp table intake_odd (
  row_key bigint, series_id integer, name varchar, observed_at timestamp,
  value double, open double, high double, low double, volume double, reason varchar, fields varchar
)

-- name: intake_unknown_names
-- The names that the book does not know, in order of first appearance.
select name
from (
  select name, row_key from intake_row where observed_at is not null
  union all
  select name, row_key from intake_odd where series_id is null
)
where name is not null and name not in (select name from intake_known)
group by name
order by min(row_key)

-- name: intake_refuse_unread
-- The rows that say nothing to settle: unreadable ones and those of unknown or impossible names.
create temp table intake_refusal as
select r.row_key, u.reason, r.name, null::varchar as fields
from intake_row r
join intake_unknown u on u.name = r.name
where r.observed_at is not null
union all
select o.row_key, coalesce(u.reason, o.reason), o.name, o.fields
from intake_odd o
left join intake_unknown u on u.name = o.name
where coalesce(u.reason, o.reason) is not null

-- name: intake_to_settle
-- The rows to settle, those of names that became known since they were read among them.
select r.row_key, coalesce(r.series_id, k.series_id) as series_id, r.observed_at,
  r.value, r.open, r.high, r.low, r.volume
from (
  select *
  from intake_row
  where observed_at is not null
  union all by name
  select row_key, series_id, name, observed_at, value, open, high, low, volume
  from intake_odd
  where reason is null
) r
left join intake_known k on k.name = r.name
where coalesce(r.series_id, k.series_id) is not null

-- name: intake_keep_refused
-- Keeps the refused rows; those of an unknown series with what they said, so that they can be taken up later. The
-- cells of a long line keep its beginning alone: a thousand copies of it would be no help.
insert into base.refused_row
select $intake_id, f.row_key // 1048576, f.row_key % 1048576,
  case when f.row_key % 1048576 > 0 and length(f.text) > 200 then f.text[:200] || '…' else f.text end, r.reason,
  case when r.reason = 'unknown_series' then r.name end,
  case when r.reason = 'unknown_series' then coalesce(r.fields, to_json({
    'time': trim(f.time, $whitespace), 'value': trim(f.value, $whitespace), 'open': trim(f.open, $whitespace),
    'high': trim(f.high, $whitespace), 'low': trim(f.low, $whitespace), 'volume': trim(f.volume, $whitespace)
  })::varchar) end,
  $run_id, null
from (fields) f
join intake_refusal r on r.row_key = f.row_key
order by f.row_key
