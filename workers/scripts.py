"""What workers and the keeper do to records in one step: Lua that compares before it writes.

A worker that was taken for dead may wake up: whatever it writes then must find that its attempt is no longer the one.
"""

_NOW = """
local time = redis.call('TIME')
local now = string.format('%.0f', time[1] * 1000 + math.floor(time[2] / 1000))
"""

_END = """
local function ending(id, state, retention, fields)
  local expires = string.format('%.0f', tonumber(now) + math.floor(tonumber(retention) * 1000))
  redis.call('HSET', record, 'state', state, 'finished_at', now, 'expires_at', expires, unpack(fields))
  redis.call('ZADD', expiring, expires, id)
  redis.call('PUBLISH', channel, state)
end
"""

CLAIM = (
    _NOW
    + """
-- KEYS: record, request, waiting, started; ARGV: carrier, its name, a token of this claim
local is = redis.call('HMGET', KEYS[1], 'state', 'carrier', 'token', 'attempt', 'cancel')
if is[1] == 'running' and is[3] == ARGV[3] then return {is[4], redis.call('GET', KEYS[2])} end
if is[1] ~= 'queued' or is[2] ~= ARGV[1] then return {'0'} end
local attempt = redis.call('HINCRBY', KEYS[1], 'attempt', 1)
redis.call('HSET', KEYS[1], 'state', 'running', 'started_at', now, 'token', ARGV[3])
redis.call('HDEL', KEYS[1], 'evidence', 'phase', 'done')
redis.call('ZREM', KEYS[3], ARGV[2])
redis.call('ZADD', KEYS[4], now, ARGV[2])
return {tostring(attempt), redis.call('GET', KEYS[2])}
"""
)
"""Begin an attempt, if this carrier is the job's and nobody has begun it; the same claim again finds itself."""

REPORT = """
-- KEYS: record; ARGV: attempt, phase, done
local is = redis.call('HMGET', KEYS[1], 'state', 'attempt', 'cancel')
if is[2] ~= ARGV[1] or (is[1] ~= 'running' and is[1] ~= 'cancelling') then return 'lost' end
if ARGV[2] ~= '' then redis.call('HSET', KEYS[1], 'phase', ARGV[2], 'done', ARGV[3]) end
return is[3] or ''
"""
"""Tell how far the attempt is, and hear whether it should end."""

END = (
    _NOW
    + """
-- KEYS: record, started, expiring, channel, the attempt's answer, the job's answer
-- ARGV: job id, attempt, carrier's name, state, parts of the answer, then fields and values
local record, expiring, channel = KEYS[1], KEYS[3], KEYS[4]
"""
    + _END
    + """
local is = redis.call('HMGET', record, 'state', 'attempt', 'cancel', 'retention_seconds')
if is[2] ~= ARGV[2] or (is[1] ~= 'running' and is[1] ~= 'cancelling') then
  redis.call('UNLINK', KEYS[5])
  return 'lost'
end
if ARGV[4] == 'finished' and is[3] ~= 'cancel' and redis.call('HLEN', KEYS[5]) ~= tonumber(ARGV[5]) then
  return 'incomplete'
end
redis.call('ZREM', KEYS[2], ARGV[3])
if is[3] == 'cancel' then
  redis.call('UNLINK', KEYS[5])
  ending(ARGV[1], 'cancelled', is[4], {'phase', ''})
  return 'cancelled'
end
if ARGV[4] == 'finished' then
  redis.call('RENAME', KEYS[5], KEYS[6])
  redis.call('PERSIST', KEYS[6])
else
  redis.call('UNLINK', KEYS[5])
end
ending(ARGV[1], ARGV[4], is[4], {unpack(ARGV, 6)})
return ARGV[4]
"""
)
"""End the attempt with what it found, unless it was called off meanwhile or is no longer the job's.

A pipeline's earlier writes may have been refused: an answer that is not whole is not handed out. Redis checks its
memory at a script's first write only, and the first one here takes something away: an end finds room where nothing
else does.
"""

GIVE_BACK = (
    _NOW
    + """
-- KEYS: record, waiting, started; ARGV: attempt, carrier's name, the next carrier's name
local is = redis.call('HMGET', KEYS[1], 'state', 'attempt')
if is[2] ~= ARGV[1] or is[1] ~= 'running' then return 'lost' end
redis.call('ZREM', KEYS[3], ARGV[2])
redis.call('HSET', KEYS[1], 'state', 'queued')
redis.call('HINCRBY', KEYS[1], 'carrier', 1)
redis.call('HDEL', KEYS[1], 'started_at', 'phase', 'done')
redis.call('ZADD', KEYS[2], 0, ARGV[3])
return 'queued'
"""
)
"""Put the job back as it was, at no cost of a try: the keeper puts what is due (score 0) into the queue."""

WITNESS = """
-- KEYS: record; ARGV: carrier, what was seen
local is = redis.call('HMGET', KEYS[1], 'state', 'carrier')
if is[2] == ARGV[1] and is[1] ~= 'finished' and is[1] ~= 'failed' and is[1] ~= 'cancelled' then
  redis.call('HSET', KEYS[1], 'evidence', ARGV[2])
end
return 'noted'
"""
"""Note how a work-horse died, for the words of a failure."""

LOSE = (
    _NOW
    + """
-- KEYS: record, waiting, started, expiring, channel
-- ARGV: job id, carrier, its name, the next carrier's name, carriers that may be lost before they are begun
local record, expiring, channel = KEYS[1], KEYS[4], KEYS[5]
"""
    + _END
    + """
redis.call('ZREM', KEYS[2], ARGV[3])
redis.call('ZREM', KEYS[3], ARGV[3])
local is = redis.call('HMGET', record, 'state', 'carrier', 'attempt', 'tries_left', 'cancel', 'retention_seconds',
                      'evidence')
local state = is[1]
if not state or is[2] ~= ARGV[2] then return 'other' end
if state ~= 'queued' and state ~= 'running' and state ~= 'cancelling' then return 'ended' end
local how = is[7] or 'no more was heard of it'
if state ~= 'queued' then
  local tries = redis.call('HINCRBY', record, 'tries_left', -1)
  if is[5] and is[5] ~= '' then
    ending(ARGV[1], 'cancelled', is[6], {'phase', ''})
    return 'cancelled'
  end
  if tries <= 0 then
    ending(ARGV[1], 'failed', is[6], {'error_reason', 'worker-lost', 'error_detail',
           'Each of ' .. is[3] .. ' workers was lost while it worked on this job; the last: ' .. how .. '.'})
    return 'failed'
  end
elseif tonumber(is[2]) - tonumber(is[3] or '0') >= tonumber(ARGV[5]) then
  ending(ARGV[1], 'failed', is[6], {'error_reason', 'worker-lost', 'error_detail',
         'Again and again the job was taken from its queue and not begun; the last time: ' .. how .. '.'})
  return 'failed'
end
redis.call('HSET', record, 'state', 'queued', 'carrier', tonumber(ARGV[2]) + 1)
redis.call('HDEL', record, 'started_at', 'phase', 'done')
redis.call('ZADD', KEYS[2], 0, ARGV[4])
return 'queued'
"""
)
"""Take note that a carrier was lost: once for each, since the next one has another number."""
