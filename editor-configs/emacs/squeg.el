;;; squeg.el --- netlists with eglot  -*- lexical-binding: t -*-
;; Emacs 29 or newer, or an older one with eglot from ELPA: put this file on the load path and
;; (require 'squeg) in the init file; `squeg' must be on the PATH. Findings appear through flymake.
(require 'eglot)
(define-derived-mode netlist-mode prog-mode "Netlist"
  "Major mode for circuit netlists."
  (setq-local comment-start "* "))
(add-to-list 'auto-mode-alist
             '("\\.\\(?:cir\\|ckt\\|net\\|iss\\|inc\\|lib\\|sub\\)\\'" . netlist-mode))
(add-to-list 'eglot-server-programs '(netlist-mode . ("squeg" "serve")))
(add-hook 'netlist-mode-hook #'eglot-ensure)
(provide 'squeg)
;;; squeg.el ends here
