// Orchard frost-guard station: measures eight probes, estimates frost, opens sprinkler valves, keeps a log, reports by radio.
module timebase (input clk, input rst_n, input [15:0] divide, output reg tick, output reg half_bit, output reg second);
  reg [15:0] fast;
  reg [9:0] slow;
  reg [5:0] bits;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin fast <= 16'd0; slow <= 10'd0; bits <= 6'd0; tick <= 1'b0; half_bit <= 1'b0; second <= 1'b0; end
    else begin
      tick <= (fast == divide);
      fast <= (fast == divide) ? 16'd0 : fast + 16'd1;
      bits <= bits + 6'd1;
      half_bit <= (bits == 6'd63);
      if (tick) slow <= slow + 10'd1;
      second <= tick & (slow == 10'd1023);
    end
endmodule

module reporter (input clk, input rst_n, input second, input full, input busy, input [11:0] wet_bulb, input [95:0] means,
                 output reg push, output [7:0] data, output send);
  reg [3:0] index;
  reg active;
  wire [127:0] frame = {8'ha5, 4'd0, wet_bulb, means, 8'h5a};
  assign data = frame[{4'd15 - index, 3'b000} +: 8];
  assign send = !active & !busy;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin index <= 4'd0; active <= 1'b0; push <= 1'b0; end
    else begin
      push <= active & !full;
      if (second) active <= 1'b1;
      else if (active & !full) begin index <= index + 4'd1; if (index == 4'd15) active <= 1'b0; end
    end
endmodule

module station (input clk, input rst_n, input probe_bit, input probe_strobe, input bus_write, input [5:0] bus_address,
                input [15:0] bus_in, output [15:0] bus_out, output [2:0] channel, output [2:0] coil, output line, output alarm);
  wire tick, half_bit, second, done, warn, push, send, busy, full;
  wire [95:0] means;
  wire [11:0] wet_bulb;
  wire [15:0] log_data;
  wire [31:0] now;
  wire [7:0] log_head, data;
  wire [319:0] words;
  reg warned;
  always @(posedge clk or negedge rst_n) if (!rst_n) warned <= 1'b0; else if (second) warned <= warn;
  assign alarm = warn & warned;
  timebase u_time (.clk(clk), .rst_n(rst_n), .divide(words[15:0]), .tick(tick), .half_bit(half_bit), .second(second));
  sampler u_sampler (.clk(clk), .rst_n(rst_n), .probe_bit(probe_bit), .probe_strobe(probe_strobe), .channel(channel), .done(done), .means(means));
  frost u_frost (.clk(clk), .rst_n(rst_n), .step(done), .air(means[11:0]), .humidity(means[23:12]), .b0(words[27:16]), .a1(words[43:32]),
                 .wet_bulb(wet_bulb), .warn(warn));
  valves u_valves (.clk(clk), .rst_n(rst_n), .tick(tick), .warn(warn), .wet_bulb(wet_bulb), .gains(words[71:48]), .limit(words[103:96]), .coil(coil));
  journal u_journal (.clk(clk), .rst_n(rst_n), .second(second), .write(second & (warn != warned)), .entry({warn, 3'd0, wet_bulb}),
                     .read_at(words[119:112]), .read_data(log_data), .now(now), .head(log_head));
  reporter u_reporter (.clk(clk), .rst_n(rst_n), .second(second), .full(full), .busy(busy), .wet_bulb(wet_bulb), .means(means),
                       .push(push), .data(data), .send(send));
  radio u_radio (.clk(clk), .rst_n(rst_n), .half_bit(half_bit), .push(push), .in(data), .send(send), .line(line), .busy(busy), .full(full));
  settings u_settings (.clk(clk), .rst_n(rst_n), .bus_write(bus_write), .bus_address(bus_address), .bus_in(bus_in), .bus_out(bus_out),
                       .means(means), .wet_bulb(wet_bulb), .now(now), .log_data(log_data), .log_head(log_head), .words(words));
endmodule
