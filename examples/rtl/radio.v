// Radio frames: a queue of bytes, a check sum (CRC-16, polynomial 0x8005), and a biphase line code.
module byte_queue (input clk, input rst_n, input push, input pop, input [7:0] in, output [7:0] out, output empty, output full);
  reg [7:0] slot [0:15];
  reg [4:0] first, last;
  assign empty = (first == last);
  assign full = (first[3:0] == last[3:0]) & (first[4] != last[4]);
  assign out = slot[first[3:0]];
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin first <= 5'd0; last <= 5'd0; end
    else begin
      if (push & !full) last <= last + 5'd1;
      if (pop & !empty) first <= first + 5'd1;
    end
  always @(posedge clk) if (push & !full) slot[last[3:0]] <= in;
endmodule

module check_sum (input clk, input rst_n, input clear, input feed, input [7:0] in, output reg [15:0] sum);
  reg [15:0] next;
  integer i;
  always @* begin
    next = sum;
    for (i = 7; i >= 0; i = i - 1)
      next = {next[14:0], 1'b0} ^ ((next[15] ^ in[i]) ? 16'h8005 : 16'h0000);
  end
  always @(posedge clk or negedge rst_n)
    if (!rst_n) sum <= 16'hffff;
    else if (clear) sum <= 16'hffff;
    else if (feed) sum <= next;
endmodule

module radio (input clk, input rst_n, input half_bit, input push, input [7:0] in, input send, output line, output busy, output full);
  wire [7:0] head;
  wire empty;
  wire [15:0] sum;
  reg [2:0] state;      // 0 idle, 1 preamble, 2 body, 3 and 4 check sum
  reg [7:0] shift;
  reg [3:0] count;      // half bits
  reg level;
  wire byte_end = half_bit & (count == 4'd15);
  wire pop = byte_end & ((state == 3'd1) | (state == 3'd2)) & !empty;
  byte_queue queue (.clk(clk), .rst_n(rst_n), .push(push), .pop(pop), .in(in), .out(head), .empty(empty), .full(full));
  check_sum check (.clk(clk), .rst_n(rst_n), .clear(state == 3'd0), .feed(pop), .in(head), .sum(sum));
  assign busy = (state != 3'd0);
  assign line = level;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin state <= 3'd0; shift <= 8'd0; count <= 4'd0; level <= 1'b0; end
    else if (state == 3'd0) begin
      if (send & !empty) begin state <= 3'd1; shift <= 8'h55; count <= 4'd0; end
    end else if (half_bit) begin
      count <= count + 4'd1;
      if (!count[0] | shift[7]) level <= !level;
      if (count[0]) shift <= {shift[6:0], 1'b0};
      if (byte_end)
        case (state)
          3'd1, 3'd2: begin state <= empty ? 3'd3 : 3'd2; shift <= empty ? sum[15:8] : head; end
          3'd3: begin state <= 3'd4; shift <= sum[7:0]; end
          default: state <= 3'd0;
        endcase
    end
endmodule
