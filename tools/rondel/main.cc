#include <glog/logging.h>

#include <string>
#include <vector>

#include "tools/rondel/program.h"

int main(int argc, char** argv) {
  FLAGS_minloglevel = google::GLOG_FATAL;  // the solver's own remarks are not for people
  return rondel::app::run_program(std::vector<std::string>(argv + (argc > 0 ? 1 : 0), argv + argc));
}
