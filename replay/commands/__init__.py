"""One module a subcommand: ``configure(parser)`` declares its arguments, ``main(args)`` runs it."""
