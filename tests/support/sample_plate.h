#pragma once

#include <gtest/gtest.h>

#include <Eigen/Core>
#include <fstream>
#include <nlohmann/json.hpp>
#include <opencv2/core.hpp>
#include <string>
#include <vector>

#include "photo/photo.h"
#include "sheet/camera.h"
#include "sheet/sheet_description.h"

namespace laygauge {

// A sample photograph with the truth that it was rendered from.
struct SamplePlate {
  std::string name;
  Photo photo;
  SheetDescription sheet;
  View view;  // the true one
  double thickness_mm = 0;
  nlohmann::json truth;
};

inline std::string SourcePath(const std::string& path) {
  return std::string(LAYGAUGE_SOURCE_DIR) + "/" + path;
}

// The truth's world has its origin at the sheet's centre, x right, y up, z towards the camera.
inline View TrueView(const nlohmann::json& truth, const SheetDescription& sheet,
                     const cv::Size& image_size) {
  View view;
  const auto& k = truth.at("camera_matrix");
  view.camera.image_size_px = image_size;
  view.camera.focal_px = k[0][0];
  view.camera.center_x_px = k[0][2];
  view.camera.center_y_px = k[1][2];
  const auto& lens = truth.at("lens_k1_k2_p1_p2");
  view.camera.k1 = lens[0];
  view.camera.k2 = lens[1];
  view.camera.p1 = lens[2];
  view.camera.p2 = lens[3];
  Eigen::Matrix3d rotation;
  Eigen::Vector3d translation;
  for (int r = 0; r < 3; ++r) {
    for (int c = 0; c < 3; ++c) rotation(r, c) = truth.at("world_to_camera")[r][c];
    translation[r] = truth.at("world_to_camera")[r][3];
  }
  view.pose.camera_from_sheet_rotation = rotation * Eigen::Vector3d(1, -1, -1).asDiagonal();
  view.pose.camera_from_sheet_translation_mm =
      rotation * Eigen::Vector3d(-sheet.page_width_mm / 2, sheet.page_height_mm / 2, 0) +
      translation;
  return view;
}

inline SamplePlate ReadSamplePlate(const std::string& name) {
  SamplePlate plate;
  plate.name = name;
  std::ifstream file(SourcePath("tests/truth/" + name + ".truth.json"));
  plate.truth = nlohmann::json::parse(file);
  auto photo = ReadPhoto(SourcePath("sample-images/" + name + ".jpg"));
  if (!photo) {
    ADD_FAILURE() << photo.error().message;
    return plate;
  }
  plate.photo = std::move(*photo);
  for (const SheetDescription& sheet : ShippedSheets()) {
    if (sheet.name == plate.truth.at("sheet").get<std::string>()) plate.sheet = sheet;
  }
  plate.view = TrueView(plate.truth, plate.sheet, plate.photo.size());
  plate.thickness_mm = plate.truth.at("thick_mm");
  return plate;
}

}  // namespace laygauge
