#pragma once

#include <string>

#include "tools/desk/work.h"
#include "tools/rondel/desk/bench.h"

namespace httplib {
class Server;
}

namespace rondel::app {

/// Everything the desk's server answers with, besides who may come in (desk::Guard).
struct DeskParts {
  Bench& bench;
  desk::Events& events;
  desk::Work& work;
  bool this_machine_only = true;  ///< folders outside the venue may be named in requests
};

/// Binds the page's files and its API to a server. `parts` must outlive it.
void add_routes(httplib::Server& server, DeskParts& parts);

}  // namespace rondel::app
