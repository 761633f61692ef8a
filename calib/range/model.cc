#include "calib/range/model.h"

#include <array>

namespace rondel::range {
namespace {

// A further model: its file, and its row here.
const std::array kTable = {
    ModelRow{"drawing", true, 0, true, make_drawing},
    ModelRow{"drawing", false, 0, true, make_drawing},
    ModelRow{"sphere", true, 0, false, make_sphere},
    ModelRow{"sphere", false, 0, false, make_sphere},
    ModelRow{"taylor", true, 3, false, make_taylor},
    ModelRow{"taylor", false, 3, false, make_taylor},
    ModelRow{"taylor", true, 4, false, make_taylor},
    ModelRow{"polynomial", true, 3, false, make_polynomial},
    ModelRow{"polynomial", false, 3, false, make_polynomial},
    ModelRow{"polynomial", false, 4, false, make_polynomial},
};

}  // namespace

std::span<const ModelRow> model_table() { return kTable; }

std::string full_name(const ModelRow& row) {
  return row.name + (row.order > 0 ? std::to_string(row.order) : "") + (row.tilt ? "+tilt" : "");
}

const ModelRow* find_model(const std::string& full) {
  for (const ModelRow& row : kTable) {
    if (full_name(row) == full) return &row;
  }
  return nullptr;
}

int index_of(const Model& model, const std::string& parameter) {
  const std::vector<Parameter>& list = model.parameters();
  for (std::size_t i = 0; i < list.size(); ++i) {
    if (list[i].name == parameter) return static_cast<int>(i);
  }
  return -1;
}

}  // namespace rondel::range
