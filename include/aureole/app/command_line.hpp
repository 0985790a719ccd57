#pragma once

namespace aureole::app {

/// The program `aureole`: reads the arguments, runs, reports on the terminal, and returns the exit code
/// (ErrorKind; 0 on success).
int run(int argc, char** argv);

} // namespace aureole::app
