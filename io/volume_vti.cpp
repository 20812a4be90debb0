// VTK image data (.vti), through VTK's own reader.
#include <vtkCommand.h>
#include <vtkDataArray.h>
#include <vtkExecutive.h>
#include <vtkImageData.h>
#include <vtkInformation.h>
#include <vtkLogger.h>
#include <vtkMatrix3x3.h>
#include <vtkNew.h>
#include <vtkOutputWindow.h>
#include <vtkPointData.h>
#include <vtkSmartPointer.h>
#include <vtkStreamingDemandDrivenPipeline.h>
#include <vtkXMLImageDataReader.h>

#include <algorithm>
#include <cstring>
#include <exception>
#include <fstream>
#include <iterator>
#include <locale>
#include <sstream>
#include <string>

#include "io/file_volume.h"
#include "io/memory_volume.h"
#include "io/volume_formats.h"
#include "io/vti_blocks.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// The header, and the first piece's, lie here.
constexpr std::size_t searched_bytes = 64 << 10;

// Keeps the reader's complaints from stderr and remembers that there were any.
class ErrorNote : public vtkCommand {
 public:
  static ErrorNote* New() { return new ErrorNote; }
  void Execute(vtkObject*, unsigned long, void*) override { seen = true; }
  bool seen = false;
};

// What VTK's other parts (parser, decompressor) would print.
class NoteWindow : public vtkOutputWindow {
 public:
  static NoteWindow* New() {
    auto* window = new NoteWindow;
    window->InitializeObjectBase();
    return window;
  }
  void DisplayText(const char*) override {}
  void DisplayErrorText(const char*) override { seen = true; }
  void DisplayWarningText(const char*) override {}
  bool seen = false;
};

// While it lives VTK prints nothing and errors are noted.
class QuietVtk {
 public:
  QuietVtk() : cutoff_(vtkLogger::GetCurrentVerbosityCutoff()), before_(vtkOutputWindow::GetInstance()) {
    vtkLogger::SetStderrVerbosity(vtkLogger::VERBOSITY_OFF);
    vtkOutputWindow::SetInstance(window_);
  }
  QuietVtk(const QuietVtk&) = delete;
  QuietVtk& operator=(const QuietVtk&) = delete;
  ~QuietVtk() {
    vtkOutputWindow::SetInstance(before_);
    vtkLogger::SetStderrVerbosity(cutoff_);
  }
  bool seen_errors() const { return window_->seen; }

 private:
  vtkLogger::Verbosity cutoff_;
  vtkSmartPointer<vtkOutputWindow> before_;
  vtkNew<NoteWindow> window_;
};

// VTK reads what is missing from a truncated file as anything; the closing tag tells that the file is whole.
bool ends_whole(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  in.seekg(0, std::ios::end);
  const auto size = static_cast<std::int64_t>(in.tellg());
  constexpr std::int64_t tail_bytes = 64;
  in.seekg(std::max<std::int64_t>(0, size - tail_bytes));
  const std::string tail{std::istreambuf_iterator<char>(in), {}};
  return tail.find("</VTKFile>") != std::string::npos;
}

// VTK takes memory for a piece before it looks whether the piece lies within the whole.
void check_pieces(const std::string& head, const int (&extent)[6], const fs::path& file) {
  const std::string mark = "<Piece Extent=\"";
  for (std::size_t at = head.find(mark); at != std::string::npos; at = head.find(mark, at + 1)) {
    std::istringstream in(head.substr(at + mark.size(), 100));
    in.imbue(std::locale::classic());
    for (std::size_t i = 0; i < 6; ++i) {
      long long bound = 0;
      const std::size_t axis = i / 2 * 2;
      if (!(in >> bound) || bound < extent[axis] || bound > extent[axis + 1])
        refuse_file(file, "has a piece that does not lie within the whole volume; the file is damaged");
    }
  }
}

VoxelType voxel_type(int vtk_type, const fs::path& file) {
  switch (vtk_type) {
    case VTK_UNSIGNED_CHAR:
      return VoxelType::u8;
    case VTK_CHAR:
    case VTK_SIGNED_CHAR:
      return VoxelType::i8;
    case VTK_UNSIGNED_SHORT:
      return VoxelType::u16;
    case VTK_SHORT:
      return VoxelType::i16;
    case VTK_FLOAT:
      return VoxelType::f32;
    default:
      refuse_file(file, "its voxel type is not read; export 8- or 16-bit integers or 32-bit floats");
  }
}

}  // namespace

OpenedVolume open_vti(const fs::path& file) {
  const std::string head = file_head(file, searched_bytes);
  if (head.find("<VTKFile") == std::string::npos || head.find("ImageData") == std::string::npos)
    refuse_file(file, "is no VTK image data");
  if (!ends_whole(file)) refuse_file(file, "is truncated: its closing tag is missing");
  const QuietVtk quiet;
  vtkNew<vtkXMLImageDataReader> reader;
  vtkNew<ErrorNote> note;
  reader->AddObserver(vtkCommand::ErrorEvent, note);
  reader->AddObserver(vtkCommand::WarningEvent, note);
  reader->GetExecutive()->AddObserver(vtkCommand::ErrorEvent, note);
  reader->SetReaderErrorObserver(note);
  reader->SetParserErrorObserver(note);
  reader->SetFileName(file.c_str());
  try {
    reader->UpdateInformation();
  } catch (const std::exception&) {
    refuse_file(file, "its header asks for more memory than there is; the file is damaged");
  }
  OpenedVolume out;
  out.format = "VTK image data";
  int extent[6] = {0, -1, 0, -1, 0, -1};
  if (!note->seen && reader->GetOutputInformation(0)->Has(vtkStreamingDemandDrivenPipeline::WHOLE_EXTENT())) {
    reader->GetOutputInformation(0)->Get(vtkStreamingDemandDrivenPipeline::WHOLE_EXTENT(), extent);
  }
  VolumeGeometry geometry;
  for (std::size_t a = 0; a < 3; ++a)
    geometry.size[a] = static_cast<std::int64_t>(extent[2 * a + 1]) - extent[2 * a] + 1;
  if (note->seen || quiet.seen_errors()) refuse_file(file, "is truncated or damaged");
  checked_byte_count(geometry, VoxelType::u8, file);
  check_pieces(head, extent, file);
  // Compressed blocks expand by 1032 times at most, text and base64 shrink: more voxels than that cannot be
  // there.
  if (static_cast<std::uint64_t>(geometry.voxel_count()) / 1040 > fs::file_size(file))
    refuse_file(file, "the header promises more voxels than the file can hold");
  check_packed_blocks(file, head, geometry.voxel_count());
  try {
    reader->Update();
  } catch (const std::exception&) {  // std::bad_alloc, std::length_error from sizes within the data
    refuse_file(file, "its data ask for more memory than there is; the file is damaged");
  }
  vtkImageData* image = reader->GetOutput();
  vtkDataArray* voxels = image->GetPointData()->GetScalars();
  if (voxels == nullptr) voxels = image->GetPointData()->GetArray(0);
  if (note->seen || quiet.seen_errors() || voxels == nullptr ||
      voxels->GetNumberOfTuples() != geometry.voxel_count())
    refuse_file(file, "holds no point data for its voxels, or is truncated");
  if (voxels->GetNumberOfComponents() != 1)
    refuse_file(file, "has several values a voxel; a grey-value volume has one");
  const VoxelType type = voxel_type(voxels->GetDataType(), file);
  for (std::size_t a = 0; a < 3; ++a) geometry.spacing_mm[a] = image->GetSpacing()[a];
  for (std::size_t r = 0; r < 3; ++r) {
    for (std::size_t c = 0; c < 3; ++c)
      geometry.direction[3 * r + c] =
          image->GetDirectionMatrix()->GetElement(static_cast<int>(r), static_cast<int>(c));
  }
  // The origin belongs to index 0, the first voxel to the extent's begin.
  double first[3];
  const int index[3] = {extent[0], extent[2], extent[4]};
  image->TransformIndexToPhysicalPoint(index, first);
  geometry.origin_mm = {first[0], first[1], first[2]};
  check_geometry(geometry, file);
  auto volume = std::make_unique<MemoryVolume>(geometry, type);
  std::memcpy(volume->data(), voxels->GetVoidPointer(0),
              static_cast<std::size_t>(geometry.voxel_count()) * bytes_per_voxel(type));
  out.source = std::move(volume);
  out.has_voxel_size = true;
  out.data_files.push_back(file);
  return out;
}

}  // namespace halfmark
