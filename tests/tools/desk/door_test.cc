#include "tools/desk/door.h"

#include <arpa/inet.h>
#include <gmock/gmock.h>
#include <sys/resource.h>
#include <sys/socket.h>
#include <unistd.h>

#include <thread>
#include <vector>

#include "calib/base/problem.h"
#include "tools/desk/guard.h"

namespace rondel::desk {
namespace {

class DoorTest : public testing::Test {
 protected:
  DoorTest() {
    port_ = door_.open("127.0.0.1", 0);
    guard_.token = "0123456789abcdef";
    guard_.cookie = "desk";
    guard_.hosts = {"127.0.0.1:" + std::to_string(port_)};
    door_.set_pre_routing_handler([this](const httplib::Request& request, httplib::Response& res) {
      return guard_.admits(request, res) ? httplib::Server::HandlerResponse::Unhandled
                                         : httplib::Server::HandlerResponse::Handled;
    });
    door_.Get("/hello", [](const httplib::Request&, httplib::Response& response) {
      response.set_content("hello", "text/plain");
    });
    door_.Post("/echo", [](const httplib::Request& request, httplib::Response& response) {
      response.set_content(std::to_string(request.body.size()), "text/plain");
    });
    thread_ = std::thread([this] { door_.serve(); });
  }
  ~DoorTest() override {
    door_.shut();
    thread_.join();
  }
  DoorTest(const DoorTest&) = delete;
  DoorTest& operator=(const DoorTest&) = delete;

  [[nodiscard]] httplib::Client client() const {
    httplib::Client made("127.0.0.1", port_);
    made.set_default_headers({{"Cookie", "other=1; desk=0123456789abcdef"}});
    return made;
  }

  Door door_{{.waiting_connections = 64, .body_bytes = 1 << 20}};
  Guard guard_;
  int port_ = 0;
  std::thread thread_;
};

TEST_F(DoorTest, AnswersSeveralRequestsOnOneConnection) {
  httplib::Client visitor = client();
  visitor.set_keep_alive(true);
  for (int i = 0; i < 20; ++i) {
    const auto answer = visitor.Get("/hello");
    ASSERT_TRUE(answer);
    EXPECT_EQ(answer->body, "hello");
  }
  const auto echo = visitor.Post("/echo", std::string(1000000, 'x'), "text/plain");
  ASSERT_TRUE(echo);
  EXPECT_EQ(echo->body, "1000000");
}

TEST_F(DoorTest, TheTokenBecomesACookieAndNothingElseOpens) {
  httplib::Client stranger("127.0.0.1", port_);
  EXPECT_EQ(stranger.Get("/hello")->status, 401);
  EXPECT_EQ(stranger.Get("/?token=0123456789abcdee")->status, 401);
  const auto entry = stranger.Get("/?token=0123456789abcdef");
  EXPECT_EQ(entry->status, 302);
  EXPECT_THAT(entry->get_header_value("Set-Cookie"),
              testing::AllOf(testing::HasSubstr("desk=0123456789abcdef"),
                             testing::HasSubstr("HttpOnly"),
                             testing::HasSubstr("SameSite=Strict")));
  EXPECT_EQ(stranger.Get("/hello", {{"Cookie", "desk="}})->status, 401);
  EXPECT_EQ(stranger.Get("/hello", {{"Cookie", "notdesk=0123456789abcdef"}})->status, 401);
}

TEST_F(DoorTest, ForeignHostAndForeignOriginAreRefusedEvenWithTheCookie) {
  httplib::Client visitor = client();
  EXPECT_EQ(visitor.Get("/hello", {{"Host", "rebound.example"}})->status, 421);
  EXPECT_EQ(visitor.Get("/hello", {{"Origin", "http://elsewhere.example"}})->status, 403);
  EXPECT_EQ(visitor.Get("/hello", {{"Origin", "null"}})->status, 403);
  EXPECT_EQ(
      visitor.Get("/hello", {{"Origin", "http://127.0.0.1:" + std::to_string(port_)}})->status,
      200);
}

TEST_F(DoorTest, TooLargeABodyIsRefusedAndTheNextVisitorServed) {
  httplib::Client visitor = client();
  const auto answer = visitor.Post("/echo", std::string(3 << 20, 'x'), "text/plain");
  if (answer) {
    EXPECT_EQ(answer->status, 413);
  }
  EXPECT_EQ(client().Get("/hello")->status, 200);
}

TEST_F(DoorTest, ManyConnectionsOpenedAndLeftDoNotKeepOthersOut) {
  rlimit files{};
  getrlimit(RLIMIT_NOFILE, &files);
  files.rlim_cur = files.rlim_max;
  setrlimit(RLIMIT_NOFILE, &files);
  std::vector<int> left;
  sockaddr_in address{};
  address.sin_family = AF_INET;
  address.sin_port = htons(static_cast<std::uint16_t>(port_));
  address.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
  for (int i = 0; i < 2000; ++i) {
    const int socket = ::socket(AF_INET, SOCK_STREAM, 0);
    ASSERT_GE(socket, 0);
    ASSERT_EQ(::connect(socket, reinterpret_cast<sockaddr*>(&address), sizeof address), 0);
    if (i % 2 == 0) {
      [[maybe_unused]] const ssize_t sent = ::send(socket, "GET /he", 7, MSG_NOSIGNAL);
    }
    left.push_back(socket);
  }
  EXPECT_EQ(client().Get("/hello")->status, 200);
  for (const int socket : left) ::close(socket);
}

TEST_F(DoorTest, NonsenseInsteadOfARequestIsSurvived) {
  for (const std::string& text : {std::string("\r\n\r\n"),
                                  std::string("GET\r\n\r\n"),
                                  std::string("GET / HTTP/9.9\r\n\r\n"),
                                  std::string(100, '\xff') + "\r\n\r\n",
                                  "GET /" + std::string(20000, 'a')}) {
    sockaddr_in address{};
    address.sin_family = AF_INET;
    address.sin_port = htons(static_cast<std::uint16_t>(port_));
    address.sin_addr.s_addr = htonl(INADDR_LOOPBACK);
    const int socket = ::socket(AF_INET, SOCK_STREAM, 0);
    ASSERT_EQ(::connect(socket, reinterpret_cast<sockaddr*>(&address), sizeof address), 0);
    [[maybe_unused]] const ssize_t sent = ::send(socket, text.data(), text.size(), MSG_NOSIGNAL);
    ::close(socket);
  }
  EXPECT_EQ(client().Get("/hello")->status, 200);
}

TEST(Door, AnAddressInUseIsSaidSo) {
  Door first;
  const int port = first.open("127.0.0.1", 0);
  Door second;
  EXPECT_THROW(second.open("127.0.0.1", port), InputError);
}

TEST(Guard, TokensAreLongAndDiffer) {
  EXPECT_EQ(Guard::random_token().size(), 32U);
  EXPECT_NE(Guard::random_token(), Guard::random_token());
}

}  // namespace
}  // namespace rondel::desk
