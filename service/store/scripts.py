"""What the service does to records in one step: Lua, since other processes write them too."""

SUBMIT = """
-- KEYS: record, request, by-time, waiting, idempotency, queue
-- ARGV: fingerprint, ms an idempotency key is kept, longest queue, job id, carrier, request, then fields and values
local known = redis.call('GET', KEYS[5])
if ARGV[1] ~= '' and known then
  local fingerprint, id = string.match(known, '^(%S+) (%S+)$')
  if id == ARGV[4] then return {'accepted'} end
  if fingerprint ~= ARGV[1] then return {'reused'} end
  return {'replay', id}
end
if redis.call('EXISTS', KEYS[1]) == 1 then return {'accepted'} end
local length = redis.call('LLEN', KEYS[6])
if length >= tonumber(ARGV[3]) then return {'full', length} end
local time = redis.call('TIME')
local ms = time[1] * 1000 + math.floor(time[2] / 1000)
redis.call('HSET', KEYS[1], 'created_at', string.format('%.0f', ms), unpack(ARGV, 7))
redis.call('SET', KEYS[2], ARGV[6])
redis.call('ZADD', KEYS[3], string.format('%.0f', time[1] * 1000000 + time[2]), ARGV[4])
redis.call('ZADD', KEYS[4], ms, ARGV[5])
if ARGV[1] ~= '' then redis.call('SET', KEYS[5], ARGV[1] .. ' ' .. ARGV[4], 'PX', ARGV[2]) end
return {'accepted'}
"""
"""Write a record with its request, unless its key stands for another job or the queue is too long.

Sent again after a lost reply it answers as it did the first time.
"""

CANCEL = """
-- KEYS: record, waiting, expiring, channel; ARGV: wanted stop, job id
local record = redis.call('HMGET', KEYS[1], 'state', 'cancel', 'carrier', 'retention_seconds')
local state = record[1]
if not state then return 'none' end
-- First, since Redis checks its memory at a script's first write only: a cancel gives back more than it takes.
redis.call('ZREM', KEYS[2], ARGV[2] .. '-' .. record[3])
if state == 'queued' then
  local time = redis.call('TIME')
  local ms = time[1] * 1000 + math.floor(time[2] / 1000)
  local kept = math.floor(tonumber(record[4]) * 1000)
  redis.call('HSET', KEYS[1], 'state', 'cancelled', 'cancel', ARGV[1],
             'finished_at', string.format('%.0f', ms), 'expires_at', string.format('%.0f', ms + kept))
  redis.call('ZADD', KEYS[3], ms + kept, ARGV[2])
  redis.call('PUBLISH', KEYS[4], 'cancelled')
  return 'cancelled'
end
if state == 'running' or state == 'cancelling' then
  if record[2] ~= 'cancel' then redis.call('HSET', KEYS[1], 'cancel', ARGV[1]) end
  redis.call('HSET', KEYS[1], 'state', 'cancelling')
  return 'cancelling'
end
return state
"""
"""Cancel what waits, ask what runs; to let go is the stronger wish than to hand over, whichever comes first."""

FORGET = """
-- KEYS: record, request, answer, by-time, expiring, gone; ARGV: job id, ms to remember that it is gone
local state = redis.call('HGET', KEYS[1], 'state')
if not state then return 'none' end
if state == 'queued' or state == 'running' or state == 'cancelling' then return 'live' end
redis.call('UNLINK', KEYS[1], KEYS[2], KEYS[3])
redis.call('ZREM', KEYS[4], ARGV[1])
redis.call('ZREM', KEYS[5], ARGV[1])
redis.call('SET', KEYS[6], state, 'PX', ARGV[2])
return 'forgotten'
"""
"""Delete an ended job with all that belongs to it, and remember for a while that it was there."""

PUT_DOCUMENT = """
-- KEYS: revisions, texts, counter, documents
-- ARGV: condition ('any', 'new', 'match'), etags between spaces or '*', id, text, what is known, revisions kept
local last = redis.call('GET', KEYS[3])
local known = last and redis.call('HGET', KEYS[1], last)
local etag = known and ('"' .. last .. '-' .. string.sub(cjson.decode(known)['sha256'], 1, 16) .. '"')
if ARGV[1] == 'new' and known then return {'refused', etag} end
if ARGV[1] == 'match' then
  if not known then return {'refused', ''} end
  local wanted = ' ' .. ARGV[2] .. ' '
  if ARGV[2] ~= '*' and not string.find(wanted, ' ' .. etag .. ' ', 1, true) then return {'refused', etag} end
end
local number = redis.call('INCR', KEYS[3])
local time = redis.call('TIME')
local facts = cjson.decode(ARGV[5])
facts['written_at'] = string.format('%.0f', time[1] * 1000 + math.floor(time[2] / 1000))
redis.call('HSET', KEYS[1], number, cjson.encode(facts))
redis.call('HSET', KEYS[2], number, ARGV[4])
redis.call('ZADD', KEYS[4], 0, ARGV[3])
local oldest = number - tonumber(ARGV[6])
if oldest > 0 then
  redis.call('HDEL', KEYS[1], oldest)
  redis.call('HDEL', KEYS[2], oldest)
end
return {'stored', tostring(number), facts['written_at']}
"""
"""Store the next revision of a document if the condition holds for the one that is there."""

REMOVE_DOCUMENT = """
-- KEYS: revisions, texts, counter, documents; ARGV: condition ('any', 'match'), etags or '*', id
local last = redis.call('GET', KEYS[3])
local known = last and redis.call('HGET', KEYS[1], last)
if not known then return {'none'} end
local etag = '"' .. last .. '-' .. string.sub(cjson.decode(known)['sha256'], 1, 16) .. '"'
if ARGV[1] == 'match' and ARGV[2] ~= '*'
  and not string.find(' ' .. ARGV[2] .. ' ', ' ' .. etag .. ' ', 1, true) then
  return {'refused', etag}
end
redis.call('UNLINK', KEYS[1], KEYS[2])
redis.call('ZREM', KEYS[4], ARGV[3])
return {'removed'}
"""
"""Remove a document with its revisions; the counter stays, so that no revision number is given twice."""
