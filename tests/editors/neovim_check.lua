-- Drives a language server from headless Neovim; see neovim_check.sh. Reads what to do from the
-- environment: CHECK_CONFIG, CHECK_FILE, CHECK_LINE (from 1), CHECK_TEXT.
local CODE = 'unstable-mode'
local LIMIT_MS = tonumber(vim.env.CHECK_LIMIT_MS) or 30000

local function finish(ok, message)
  io.stdout:write((ok and 'ok: ' or 'FAIL: ') .. message .. '\n')
  io.stdout:flush()
  vim.cmd(ok and 'qall!' or 'cquit! 1')
end

--- Waits for a condition; ends the check with `message` if it does not come true.
local function wait(condition, message)
  if not vim.wait(LIMIT_MS, condition, 10) then
    error({ message = message() })
  end
end

local function found(buffer)
  local lines = {}
  for _, diagnostic in ipairs(vim.diagnostic.get(buffer)) do
    if diagnostic.code == CODE then
      table.insert(lines, diagnostic.lnum + 1)
    end
  end
  return lines
end

local function describe(buffer)
  local words = {}
  for _, d in ipairs(vim.diagnostic.get(buffer)) do
    table.insert(words, ('%d:%s'):format(d.lnum + 1, tostring(d.code)))
  end
  return #words == 0 and 'none' or table.concat(words, ' ')
end

local function check()
  local line = tonumber(vim.env.CHECK_LINE)
  vim.cmd.luafile(vim.env.CHECK_CONFIG)
  vim.cmd.edit(vim.fn.fnameescape(vim.env.CHECK_FILE))
  local buffer = vim.api.nvim_get_current_buf()
  wait(function()
    return #vim.lsp.get_clients({ bufnr = buffer, name = 'squeg' }) == 1
  end, function()
    return 'no server attached to a buffer of type "' .. vim.bo[buffer].filetype .. '"'
  end)
  local client = vim.lsp.get_clients({ bufnr = buffer, name = 'squeg' })[1]

  local begin = vim.uv.hrtime()
  wait(function()
    return vim.tbl_contains(found(buffer), line)
  end, function()
    return ('no %s on line %d; diagnostics: %s'):format(CODE, line, describe(buffer))
  end)
  local shown_ms = (vim.uv.hrtime() - begin) / 1e6
  local message
  for _, diagnostic in ipairs(vim.diagnostic.get(buffer)) do
    if diagnostic.code == CODE and diagnostic.lnum + 1 == line then
      message = diagnostic.message
      if diagnostic.source ~= 'squeg' or diagnostic.severity ~= vim.diagnostic.severity.ERROR then
        error({ message = 'source or severity of the diagnostic: ' .. vim.inspect(diagnostic) })
      end
    end
  end

  begin = vim.uv.hrtime()
  vim.api.nvim_buf_set_lines(buffer, line - 1, line, true, { vim.env.CHECK_TEXT })
  wait(function()
    return #found(buffer) == 0
  end, function()
    return ('%s stays after the edit; diagnostics: %s'):format(CODE, describe(buffer))
  end)
  local cleared_ms = (vim.uv.hrtime() - begin) / 1e6

  client:stop()
  wait(function()
    return client:is_stopped()
  end, function()
    return 'the server does not stop'
  end)
  return ('"%s" on line %d after %.0f ms, gone %.0f ms after the edit (Neovim waits 150 ms itself)'):format(
    message, line, shown_ms, cleared_ms)
end

local ok, result = xpcall(check, function(reason)
  return type(reason) == 'table' and reason.message or debug.traceback(tostring(reason))
end)
finish(ok, result)
