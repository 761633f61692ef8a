#include <string>
#include <vector>

#include "tools/rondel/program.h"

int main(int argc, char** argv) {
  return rondel::app::run_program(std::vector<std::string>(argv + (argc > 0 ? 1 : 0), argv + argc));
}
