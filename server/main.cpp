// The command line. Builds every object, hands it to those who need it, and owns it.
#include <pthread.h>
#include <sys/resource.h>
#include <sys/syscall.h>
#include <unistd.h>

#include <csignal>
#include <cstdio>
#include <filesystem>
#include <memory>
#include <thread>

#include <CLI/CLI.hpp>
#include <fmt/format.h>
#include <nlohmann/json.hpp>

#include "archive/probe_client.h"
#include "base/file.h"
#include "base/limits.h"
#include "base/log.h"
#include "base/text.h"
#include "base/work_pool.h"
#include "demo/demo_archive.h"
#include "http/service.h"
#include "index/index.h"
#include "ingest/indexer.h"
#include "query/encode/encoding.h"
#include "query/engine.h"
#include "query/lists.h"

namespace bentlight {

namespace {

namespace fs = std::filesystem;

fs::path program_folder() { return fs::read_symlink("/proc/self/exe").parent_path(); }

int complain(const Error& error) {
  fmt::print(stderr, "bentlight: {}{}{} [{}]\n", error.subject, error.subject.empty() ? "" : ": ", error.text,
             name(error.code));
  if (!error.accepted.empty()) {
    fmt::print(stderr, "accepted:\n");
    for (const std::string& each : error.accepted) fmt::print(stderr, "  {}\n", each);
  }
  return error.code == ErrorCode::bad_option || error.code == ErrorCode::bad_parameter ? 2 : 1;
}

/// Turns SIGINT and SIGTERM into a stop request. Made before any other thread, so that all of them leave the signals
/// to this one.
class SignalStop {
 public:
  SignalStop() {
    sigemptyset(&signals_);
    sigaddset(&signals_, SIGINT);
    sigaddset(&signals_, SIGTERM);
    pthread_sigmask(SIG_BLOCK, &signals_, nullptr);
    std::signal(SIGPIPE, SIG_IGN);
    waiter_ = std::jthread([this](const std::stop_token& over) {
      const timespec tick{.tv_sec = 0, .tv_nsec = 200'000'000};
      while (!over.stop_requested()) {
        if (sigtimedwait(&signals_, nullptr, &tick) > 0) source_.request_stop();
      }
    });
  }
  std::stop_token token() const { return source_.get_token(); }

 private:
  sigset_t signals_{};
  std::stop_source source_;
  std::jthread waiter_;
};

/// How far something is, on a terminal as one line that is drawn over, elsewhere as JSON lines.
class ProgressLine {
 public:
  ProgressLine() : is_terminal_(::isatty(STDERR_FILENO) == 1) {}
  ~ProgressLine() {
    if (drawn_) fmt::print(stderr, "\n");
  }

  void show(std::string_view what, std::size_t done, std::size_t total, std::uint64_t bytes_done,
            std::uint64_t bytes_total, double bytes_per_second, const std::string& current) {
    const double share = bytes_total > 0 ? static_cast<double>(bytes_done) / static_cast<double>(bytes_total)
                         : total > 0     ? static_cast<double>(done) / static_cast<double>(total)
                                         : 1.0;
    if (!is_terminal_) {
      const nlohmann::ordered_json line = {{"event", what},          {"files_done", done},
                                           {"files_total", total},   {"bytes_done", bytes_done},
                                           {"bytes_total", bytes_total}, {"bytes_per_second", bytes_per_second},
                                           {"current", current}};
      fmt::print(stderr, "{}\n", line.dump(-1, ' ', false, nlohmann::ordered_json::error_handler_t::replace));
      return;
    }
    constexpr std::size_t width = 28;
    const auto filled = static_cast<std::size_t>(std::clamp(share, 0.0, 1.0) * width);
    const double left_s = bytes_per_second > 0 ? static_cast<double>(bytes_total - std::min(bytes_total, bytes_done)) / bytes_per_second : 0;
    fmt::print(stderr, "\r\033[K{} [{}{}] {}/{} files, {:.0f} MB/s, {:.0f} s left  {}", what, std::string(filled, '='),
               std::string(width - filled, ' '), done, total, bytes_per_second / 1e6, left_s,
               current.size() > 40 ? "…" + current.substr(current.size() - 39) : current);
    std::fflush(stderr);
    drawn_ = true;
  }

 private:
  const bool is_terminal_;
  bool drawn_ = false;
};

std::size_t cores() { return std::max(1U, std::thread::hardware_concurrency()); }

/// Runs the indexer while another thread shows how far it is.
Expected<ingest::IndexProgress> index_with_progress(ingest::Indexer& indexer, const std::stop_token& stop) {
  ProgressLine line;
  const auto show = [&] {
    const auto now = indexer.progress();
    line.show("indexing", now.files_done, now.files_total, now.bytes_done, now.bytes_total, now.bytes_per_second,
              now.current);
  };
  std::jthread shower([&](const std::stop_token& over) {
    for (int tick = 1; !over.stop_requested(); ++tick) {
      std::this_thread::sleep_for(std::chrono::milliseconds(100));
      if (tick % 5 == 0) show();
    }
  });
  auto report = indexer.run(stop);
  shower.request_stop();
  shower.join();
  show();
  return report;
}

struct Places {
  fs::path archive, state;
};

int run_index(const Places& places) {
  const SignalStop signals;
  const PosixFileSystem files;
  const auto index = index::Index::open_for_writing(places.state);
  if (!index) return complain(index.error());
  WorkPool pool(cores() - 1);
  Log log(stderr);
  const archive::ProbeClient probe(program_folder() / "bentlight-probe");
  ingest::Indexer indexer({files, probe, **index, pool, log}, places.archive, places.state);
  const auto report = index_with_progress(indexer, signals.token());
  if (!report) return complain(report.error());
  fmt::print("{} indexed, {} unchanged, {} refused, {} gone\n", report->indexed, report->unchanged, report->refused,
             report->missing);
  if (report->refused > 0) fmt::print("bentlight refusals --state {} says why\n", places.state.string());
  return 0;
}

/// Everything between the index and an answer, for a server or a single question.
struct Answering {
  Answering(const FileSystem& files, const index::Index& index, const Places& places, WorkPool& interactive,
            WorkPool& patient, Log& log)
      : catalogue(query::Catalogue::standard()),
        shelf(files, index, places.archive, places.state),
        cache(files, places.state / "cache",
              {.disk_bytes = 4 * limits::gibi, .memory_bytes = 128 * limits::mebi}),
        book(files, places.state / "cache" / "questions"),
        jobs(interactive, patient,
             {.memory_bytes = 4 * limits::question_memory_bytes,
              .question_bytes = limits::question_memory_bytes,
              .queued = limits::queued_questions,
              .long_at_once = 2,
              .interactive_bytes = limits::interactive_bytes}),
        engine({files, index, catalogue, shelf, cache, book, jobs, log}),
        lists(index, shelf, catalogue) {}

  query::Catalogue catalogue;
  query::ViewShelf shelf;
  query::ResultCache cache;
  query::RecipeBook book;
  query::Jobs jobs;
  query::Engine engine;
  query::Lists lists;
};

struct ServeOptions {
  std::string listen = "127.0.0.1:8787";
  bool is_reader = false;  // another process indexes
  fs::path page;
};

Expected<http::ServiceOptions> service_options(const ServeOptions& options) {
  const auto colon = options.listen.rfind(':');
  const auto port = colon == std::string::npos ? std::nullopt : parse_whole_number(options.listen.substr(colon + 1));
  if (!port || *port < 0 || *port > 65535) {
    return failure(ErrorCode::bad_option, fmt::format("--listen {} is not an address and a port", options.listen),
                   "listen", {"127.0.0.1:8787"});
  }
  std::string host = options.listen.substr(0, colon);
  if (host.starts_with('[') && host.ends_with(']')) host = host.substr(1, host.size() - 2);
  const fs::path here = program_folder();
  // Installed, the page lies beside the program's prefix; in a build tree it is still in the sources.
  fs::path page = options.page, vendor = options.page / "vendor";
  if (page.empty()) {
    page = here / ".." / "share" / "bentlight" / "page";
    vendor = page / "vendor";
    if (!fs::exists(page)) {
      page = BENTLIGHT_PAGE_SOURCE;
      vendor = here / "page" / "vendor";
    }
  }
  return http::ServiceOptions{.host = host, .port = static_cast<int>(*port), .page = page, .vendor = vendor};
}

/// Lowers the calling thread's priority, so that questions go before indexing.
void yield_to_others() { ::setpriority(PRIO_PROCESS, static_cast<id_t>(::syscall(SYS_gettid)), 10); }

int run_serve(const Places& places, const ServeOptions& options) {
  const SignalStop signals;
  const PosixFileSystem files;
  Log log(stderr);
  auto index = options.is_reader ? index::Index::open_for_reading(places.state)
                                 : index::Index::open_for_writing(places.state);
  if (!index) return complain(index.error());
  WorkPool interactive(cores());
  WorkPool patient(cores(), yield_to_others);
  Answering answering(files, **index, places, interactive, patient, log);
  const archive::ProbeClient probe(program_folder() / "bentlight-probe");
  ingest::Indexer indexer({files, probe, **index, patient, log}, places.archive, places.state);
  const auto chosen = service_options(options);
  if (!chosen) return complain(chosen.error());
  const auto service = http::Service::open(
      {answering.engine, answering.lists, answering.jobs, answering.cache, indexer, files, log}, *chosen);
  if (!service) return complain(service.error());

  std::jthread indexing;
  if (!options.is_reader) {
    indexing = std::jthread([&](const std::stop_token& over) {
      yield_to_others();
      if (const auto report = indexer.run(over); !report && report.error().code != ErrorCode::cancelled) {
        log.error("indexing-stopped", {{"reason", report.error().text}, {"subject", report.error().subject}});
      }
    });
  }
  const std::stop_callback stop(signals.token(), [&] {
    indexing.request_stop();
    (*service)->stop();
  });
  fmt::print("http://{}:{}/\n", chosen->host, (*service)->port());
  std::fflush(stdout);
  log.info("serving", {{"archive", places.archive.string()}, {"port", fmt::format("{}", (*service)->port())}});
  (*service)->run();
  answering.jobs.close();
  log.info("stopped");
  return 0;
}

struct QueryOptions {
  std::string subject, analysis, format = "json", array, output;
  std::vector<std::string> parameters;
};

int run_query(const Places& places, const QueryOptions& options) {
  const SignalStop signals;
  const PosixFileSystem files;
  Log log(stderr);
  const auto index = index::Index::open_for_reading(places.state);
  if (!index) return complain(index.error());
  WorkPool pool(cores());
  Answering answering(files, **index, places, pool, pool, log);
  query::RawParameters parameters;
  for (const std::string& pair : options.parameters) {
    const auto equals = pair.find('=');
    if (equals == std::string::npos || !parameters.emplace(pair.substr(0, equals), pair.substr(equals + 1)).second) {
      return complain({ErrorCode::bad_parameter, fmt::format("{} is not name=value, or is given twice", pair)});
    }
  }
  const auto encoding = query::parse_encoding(options.format);
  if (!encoding) return complain(encoding.error());
  const bool of_run = answering.catalogue.find(options.analysis, query::SubjectKind::run).has_value();
  const auto recipe = of_run ? answering.engine.run_recipe(options.subject, options.analysis, parameters)
                             : answering.engine.view_recipe(options.subject, options.analysis, parameters);
  if (!recipe) return complain(recipe.error());
  const std::stop_callback stop(signals.token(), [&] { answering.jobs.close(); });
  const auto answer = answering.engine.answer(*recipe, std::chrono::hours(24));
  if (!answer) return complain(answer.error());
  const auto encoded = query::encode(*answer->result, *encoding, {.array = options.array});
  if (!encoded) return complain(encoded.error());
  if (!options.output.empty()) {
    if (const auto written = files.replace(fs::absolute(options.output), as_bytes(*encoded->bytes)); !written) {
      return complain(written.error());
    }
    return 0;
  }
  std::fwrite(encoded->bytes->data(), 1, encoded->bytes->size(), stdout);
  if (*encoding == query::Encoding::json) std::fputc('\n', stdout);
  return 0;
}

int run_inspect(const fs::path& file) {
  const PosixFileSystem files;
  const archive::ProbeClient probe(program_folder() / "bentlight-probe");
  const auto tree = probe.describe(files, file);
  if (!tree) return complain(tree.error());
  fmt::print("{}\n", nlohmann::ordered_json::parse(*tree).dump(2));
  const auto structure = probe.read_structure(files, file, archive::Layout{});
  if (!structure) {
    fmt::print(stderr, "It is not in Bentlight's own layout: {} [{}]\n", structure.error().text,
               name(structure.error().code));
    return 0;
  }
  fmt::print(stderr, "It is in Bentlight's own layout: {} frames of {} x {} points.\n", structure->map.frames(),
             structure->map.rows(), structure->map.columns());
  return 0;
}

int run_demo(const fs::path& folder, const demo::DemoOptions& options) {
  const SignalStop signals;
  WorkPool pool(cores() - 1);
  ProgressLine line;
  const auto start = std::chrono::steady_clock::now();
  auto shown = start;
  const auto report = demo::write_demo_archive(
      folder, options, pool,
      [&](const demo::DemoProgress& progress) {
        const auto now = std::chrono::steady_clock::now();
        if (now - shown < std::chrono::milliseconds(300) && progress.files_done < progress.files_total) return;
        shown = now;
        const double seconds = std::chrono::duration<double>(now - start).count();
        line.show("writing", progress.files_done, progress.files_total, progress.bytes_done, progress.bytes_total,
                  static_cast<double>(progress.bytes_done) / seconds, "");
      },
      signals.token());
  if (!report) return complain(report.error());
  fmt::print("{} files in {}; what is in them is known: {}\n", report->files, folder.string(),
             report->known_answers.string());
  return 0;
}

int run_refusals(const fs::path& state) {
  const auto index = index::Index::open_for_reading(state);
  if (!index) return complain(index.error());
  for (std::size_t offset = 0;; offset += limits::page_items) {
    const auto page = (*index)->refusals(limits::page_items, offset);
    if (!page) return complain(page.error());
    for (const auto& refusal : page->items) fmt::print("{}\t{}\t{}\n", refusal.path, refusal.code, refusal.text);
    if (!page->more) return 0;
  }
}

/// Prints schema/openapi.json from the declarations; the routes' handlers are never called.
int run_description() {
  const PosixFileSystem files;
  Log log(stderr);
  const fs::path nowhere = fs::temp_directory_path() / fmt::format("bentlight-description-{}", ::getpid());
  fs::create_directories(nowhere);
  const auto index = index::Index::open_for_writing(nowhere);
  if (!index) return complain(index.error());
  WorkPool pool(1);
  Answering answering(files, **index, {nowhere, nowhere}, pool, pool, log);
  const archive::ProbeClient probe("");
  const ingest::Indexer indexer({files, probe, **index, pool, log}, nowhere, nowhere);
  const auto routes = http::service_routes(
      {answering.engine, answering.lists, answering.jobs, answering.cache, indexer, files, log}, nullptr);
  fmt::print("{}", http::openapi_description(routes, answering.catalogue));
  fs::remove_all(nowhere);
  return 0;
}

void add_state(CLI::App& command, Places& places) {
  command.add_option("--state", places.state, "Folder of the index, summaries and cache; it must be on a local disk")
      ->required();
}

void add_archive(CLI::App& command, Places& places) {
  command.add_option("--archive", places.archive, "Folder of wavefront files; never written to")
      ->required()
      ->check(CLI::ExistingDirectory);
}

int run(int argc, char** argv) {
  CLI::App app{
      "Bentlight indexes an archive of aero-optical wavefront files and answers questions about them over HTTP.\n"
      "Start with:\n"
      "  bentlight demo demo-archive\n"
      "  bentlight index --archive demo-archive --state state\n"
      "  bentlight serve --archive demo-archive --state state"};
  app.require_subcommand(1);
  app.set_version_flag("--version", "bentlight " BENTLIGHT_VERSION);
  int status = 0;

  Places places;
  ServeOptions serving;
  auto* serve = app.add_subcommand("serve", "Serves the page and the HTTP interface, and indexes what is new.");
  add_archive(*serve, places);
  add_state(*serve, places);
  serve->add_option("--listen", serving.listen, "Address and port; loopback only, port 0 takes a free one")
      ->capture_default_str();
  serve->add_option("--page", serving.page, "Folder of the page, when it lies elsewhere")->check(CLI::ExistingDirectory);
  serve->add_flag("--reader", serving.is_reader, "Only answer; another process on the same state folder indexes");
  serve->set_config("--config", "", "File with these options, one name=value a line");
  serve->callback([&] { status = run_serve(places, serving); });

  auto* index = app.add_subcommand("index", "Brings the index up to date: new, changed and vanished files.");
  add_archive(*index, places);
  add_state(*index, places);
  index->callback([&] { status = run_index(places); });

  QueryOptions question;
  auto* query = app.add_subcommand("query", "Answers one question without a server.");
  query->footer("Example: bentlight query wall-dome-az090-el30 statistics remove=piston,tilt --archive DIR --state DIR");
  query->add_option("subject", question.subject, "Id of a view, or of a run for field-of-regard")->required();
  query->add_option("analysis", question.analysis, "statistics, series, frames, field-of-regard")->required();
  query->add_option("parameters", question.parameters, "name=value …, as in the HTTP interface");
  query->add_option("--format", question.format, "json, csv, npy or hdf5")->capture_default_str();
  query->add_option("--array", question.array, "For npy and csv: which array");
  query->add_option("--output", question.output, "File to write instead of standard output");
  query->add_option("--archive", places.archive, "Folder of wavefront files, for what summaries do not know");
  add_state(*query, places);
  query->callback([&] { status = run_query(places, question); });

  fs::path inspected;
  auto* inspect = app.add_subcommand("inspect", "Shows what an HDF5 file holds, as JSON.");
  inspect->add_option("file", inspected, "The file")->required()->check(CLI::ExistingFile);
  inspect->callback([&] { status = run_inspect(inspected); });

  fs::path demo_folder;
  demo::DemoOptions demo_options;
  const std::map<std::string, demo::DemoStorage> storages = {{"mixed", demo::DemoStorage::mixed},
                                                             {"contiguous", demo::DemoStorage::contiguous},
                                                             {"chunked", demo::DemoStorage::chunked},
                                                             {"deflate", demo::DemoStorage::deflate}};
  auto* demo = app.add_subcommand("demo", "Writes a demo archive whose right answers are known.");
  demo->add_option("folder", demo_folder, "Where; an empty folder or an earlier demo archive")->required();
  demo->add_option("--views", demo_options.views_per_run, "Viewing angles of each of the two runs")->capture_default_str();
  demo->add_option("--frames", demo_options.frames, "Frames of each view")->capture_default_str();
  demo->add_option("--grid", demo_options.grid, "Points across the aperture")->capture_default_str();
  demo->add_option("--seed", demo_options.seed, "Equal seeds give equal bytes")->capture_default_str();
  demo->add_option("--storage", demo_options.storage, "mixed, contiguous, chunked or deflate")
      ->transform(CLI::CheckedTransformer(storages));
  demo->callback([&] { status = run_demo(demo_folder, demo_options); });

  auto* refusals = app.add_subcommand("refusals", "Lists the files that could not be indexed, and why.");
  add_state(*refusals, places);
  refusals->callback([&] { status = run_refusals(places.state); });

  auto* description = app.add_subcommand("describe", "Prints the OpenAPI description of the HTTP interface.");
  description->callback([&] { status = run_description(); });

  CLI11_PARSE(app, argc, argv);
  return status;
}

}  // namespace

}  // namespace bentlight

int main(int argc, char** argv) { return bentlight::run(argc, argv); }
