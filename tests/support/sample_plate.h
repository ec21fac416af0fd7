#pragma once

#include <gtest/gtest.h>

#include <nlohmann/json.hpp>
#include <string>

#include "photo/photo.h"
#include "support/truth_view.h"

namespace laygauge {

// A sample photograph with the truth that it was rendered from.
struct SamplePlate {
  std::string name;
  nlohmann::json truth;
  SheetDescription sheet;
  Photo photo;
  View view;  // the true one
  double thickness_mm = 0;
};

inline SamplePlate ReadSamplePlate(const std::string& name) {
  SamplePlate plate;
  plate.name = name;
  plate.truth = PlateTruth(name);
  plate.sheet = ShippedSheet(plate.truth.at("sheet"));
  plate.thickness_mm = plate.truth.at("thick_mm");
  auto photo = ReadPhoto(std::string(LAYGAUGE_SOURCE_DIR) + "/sample-images/" + name + ".jpg");
  if (!photo) {
    ADD_FAILURE() << photo.error().message;
    return plate;
  }
  plate.photo = std::move(*photo);
  plate.view = TruthView(plate.truth, plate.photo.size());
  return plate;
}

}  // namespace laygauge
