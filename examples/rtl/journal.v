// Logbook: a time stamp and what happened, into a memory macro used as a ring.
module journal (input clk, input rst_n, input second, input write, input [15:0] entry, input [7:0] read_at,
                output [15:0] read_data, output [31:0] now, output reg [7:0] head);
  reg [31:0] clock;
  reg stamp;
  reg [15:0] held;
  assign now = clock;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin clock <= 32'd0; head <= 8'd0; stamp <= 1'b0; held <= 16'd0; end
    else begin
      if (second) clock <= clock + 32'd1;
      if (write) begin held <= entry; stamp <= 1'b1; end
      else if (stamp) stamp <= 1'b0;
      if (write | stamp) head <= head + 8'd1;
    end
  wire busy = write | stamp;
  OR_RAM256X16 ring (.CK(clk), .WE(busy), .A(busy ? head : read_at), .D(write ? clock[15:0] : held), .Q(read_data));
endmodule
