#include "aureole/app/command_line.hpp"

int main(int argc, char** argv) {
    return aureole::app::run(argc, argv);
}
