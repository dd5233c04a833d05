"""The command line of curvefit: one module a command."""
