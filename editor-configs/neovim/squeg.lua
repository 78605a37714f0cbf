-- Neovim 0.11 or newer: put this file into ~/.config/nvim/plugin/ and have `squeg` on the PATH.
-- Findings appear as diagnostics; `:checkhealth vim.lsp` shows whether the server runs.
vim.filetype.add({
  extension = {
    cir = 'netlist', ckt = 'netlist', net = 'netlist', iss = 'netlist',
    inc = 'netlist', lib = 'netlist', sub = 'netlist',
  },
})
vim.lsp.config('squeg', {
  cmd = { 'squeg', 'serve' },
  filetypes = { 'netlist' },
  root_markers = { 'squeg.toml', '.git' },
})
vim.lsp.enable('squeg')
