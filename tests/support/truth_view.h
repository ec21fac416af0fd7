#pragma once

#include <filesystem>
#include <fstream>
#include <nlohmann/json.hpp>
#include <string>

#include "sheet/camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// A sample plate's truth: tests/truth/NAME.truth.json.
inline nlohmann::json PlateTruth(const std::string& name) {
  const std::filesystem::path folder = std::filesystem::path(LAYGAUGE_SOURCE_DIR) / "tests/truth";
  std::ifstream file(folder / (name + ".truth.json"));
  return nlohmann::json::parse(file);
}

inline const SheetDescription& ShippedSheet(const std::string& name) {
  for (const SheetDescription& sheet : ShippedSheets()) {
    if (sheet.name == name) return sheet;
  }
  throw std::invalid_argument("no shipped sheet is called " + name);
}

// The true camera and pose. The truth's world has its origin at the sheet's centre, y up and z
// towards the camera; the sheet's frame has its origin at the top left, y down and z into the
// paper.
inline View TruthView(const nlohmann::json& truth, cv::Size image_size_px) {
  const SheetDescription& sheet = ShippedSheet(truth["sheet"]);
  const auto& k = truth["camera_matrix"];
  const auto& d = truth["lens_k1_k2_p1_p2"];
  View view;
  view.camera = {image_size_px, k[0][0], k[0][2], k[1][2], d[0], d[1], d[2], d[3]};
  Eigen::Matrix3d rotation;
  Eigen::Vector3d translation;
  for (size_t i = 0; i < 3; ++i) {
    const auto row = static_cast<Eigen::Index>(i);
    const auto& values = truth["world_to_camera"][i];
    rotation.row(row) << values[0], values[1], values[2];
    translation[row] = values[3];
  }
  const Eigen::Vector3d corner(-sheet.page_width_mm / 2, sheet.page_height_mm / 2, 0);
  view.pose.camera_from_sheet_rotation = rotation * Eigen::Vector3d(1, -1, -1).asDiagonal();
  view.pose.camera_from_sheet_translation_mm = rotation * corner + translation;
  return view;
}

}  // namespace laygauge
